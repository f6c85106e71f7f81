//! `include/limnograph.h` is made from the source and says what the source says.
//!
//! To make it anew after a change: `LIMNO_WRITE_HEADER=1 cargo test --test header`.

use limnograph::lend::{FIELDS, SPECIES, Shape};
use std::fmt::Write as _;
use std::path::Path;

const SOURCES: [&str; 3] = [
    "src/run/status.rs",
    "src/capi/types.rs",
    "src/capi/functions.rs",
];

fn root() -> &'static Path {
    Path::new(env!("CARGO_MANIFEST_DIR"))
}

fn generated() -> String {
    let mut config = cbindgen::Config::from_file(root().join("cbindgen.toml"))
        .expect("cbindgen.toml is readable");
    config.header = Some(manual());
    config.trailer = Some(TRAILER.to_string());
    let builder = SOURCES.iter().fold(
        cbindgen::Builder::new().with_config(config),
        |builder, source| builder.with_src(root().join(source)),
    );
    let mut bytes = Vec::new();
    builder
        .generate()
        .expect("the header can be generated")
        .write(&mut bytes);
    let text = String::from_utf8(bytes).expect("the header is UTF-8");
    text.replace("LIMNO_STATUS_", "LIMNO_")
        .replace("LIMNO_SCALAR_", "LIMNO_")
        .replace("STATUS_", "LIMNO_")
        .replace("SCALAR_", "LIMNO_")
        .replace(" * # Safety", " * The host's duty:")
}

/// The head of the header: conventions, and the names that exist, from the tables the library itself uses.
fn manual() -> String {
    let mut fields = String::new();
    for info in FIELDS {
        let shape = match info.shape {
            Shape::Scalar => "1 number",
            Shape::Vector => "3 numbers",
            Shape::Elements => "1 for each element of the config",
            Shape::Identity => "1 integer",
        };
        let _ = writeln!(
            fields,
            " *   {:<22}{:<34}{}",
            info.name,
            shape,
            info.quantity.unit_in_config()
        );
    }
    let species: Vec<&str> = SPECIES.iter().map(|(_, name)| *name).collect();
    MANUAL
        .replace("{SPECIES}", &species.join(", "))
        .replace(" * {FIELDS}\n", &fields)
}

const MANUAL: &str = include_str!("header_manual.txt");

const TRAILER: &str = "\
/* Starting values for the structs that a host fills. */
#define LIMNO_CLOCK_INIT { sizeof(limno_clock), 0, 0.0, 0.0, 1, 0 }
#define LIMNO_ARRAY_INIT { sizeof(limno_array), 0, 1, NULL, NULL, 0, 0 }
#define LIMNO_TALLY_BATCH_INIT { sizeof(limno_tally_batch), NULL, 0, NULL, NULL, NULL, NULL, NULL, NULL, NULL, 0 }
#define LIMNO_OPTIONS_INIT { sizeof(limno_options), NULL, NULL, NULL, NULL, 0, 0 }
#define LIMNO_STANDING_INIT { sizeof(limno_standing), 0, 0, 0, 0, 0, 0.0 }
";

#[test]
fn the_committed_header_is_what_the_source_says() {
    let path = root().join("include/limnograph.h");
    let fresh = generated();
    if std::env::var_os("LIMNO_WRITE_HEADER").is_some() {
        std::fs::write(&path, &fresh).expect("the header can be written");
    }
    let committed = std::fs::read_to_string(&path).unwrap_or_default();
    assert!(
        committed == fresh,
        "include/limnograph.h has drifted from the source; LIMNO_WRITE_HEADER=1 cargo test --test header makes it anew"
    );
}

#[test]
fn every_exported_function_stands_in_the_header() {
    let header =
        std::fs::read_to_string(root().join("include/limnograph.h")).expect("the header is there");
    let source =
        std::fs::read_to_string(root().join("src/capi/functions.rs")).expect("the source is there");
    let exported: Vec<&str> = source
        .split("extern \"C\" fn ")
        .skip(1)
        .filter_map(|rest| rest.split('(').next())
        .collect();
    assert!(exported.len() > 15);
    for name in exported {
        assert!(name.starts_with("limno_"), "{name} lacks the prefix");
        assert!(
            header.contains(&format!("{name}(")),
            "{name} is missing from the header"
        );
    }
}
