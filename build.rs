//! Names the shared library and records which MPI library is built against.

use std::env;
use std::path::PathBuf;
use std::process::{Command, Stdio};

fn main() {
    println!("cargo:rerun-if-changed=build.rs");
    let with_mpi = env::var_os("CARGO_FEATURE_MPI").is_some();
    name_shared_library(with_mpi);
    if with_mpi {
        println!("cargo:rerun-if-env-changed=MPICC");
        println!("cargo:rustc-env=LIMNOGRAPH_MPI={}", mpi_library());
    }
}

/// The name that hosts record: it changes when the binary interface does, and tells the two libraries apart.
fn name_shared_library(with_mpi: bool) {
    let stem = if with_mpi {
        "limnograph_mpi"
    } else {
        "limnograph"
    };
    // Before 1.0 the second number marks incompatible changes, but the C interface has its own promise:
    // its version is the major one.
    let major = env::var("CARGO_PKG_VERSION_MAJOR").unwrap_or_default();
    println!("cargo:rustc-cdylib-link-arg=-Wl,-soname,lib{stem}.so.{major}");
}

/// Short name of the MPI library, from the version macros in its header. Must be found in the same way as
/// the bindings find it: by the compiler wrapper `MPICC`, or else `mpicc`.
fn mpi_library() -> String {
    let wrapper = env::var("MPICC").unwrap_or_else(|_| "mpicc".into());
    let out = PathBuf::from(env::var_os("OUT_DIR").unwrap_or_default());
    let source = out.join("mpi_name.c");
    // Descendants first: they also define the macros of what they descend from. A macro that is not
    // defined stays a word; the names are quoted because some are macros themselves.
    let text = "#include <mpi.h>\n\
        limnograph_names \"Cray MPICH\" = CRAY_MPICH_VERSION\n\
        limnograph_names \"Intel MPI\" = I_MPI_VERSION\n\
        limnograph_names \"MVAPICH2\" = MVAPICH2_VERSION\n\
        limnograph_names \"MVAPICH\" = MVAPICH_VERSION\n\
        limnograph_names \"Open MPI\" = OMPI_MAJOR_VERSION . OMPI_MINOR_VERSION\n\
        limnograph_names \"MPICH\" = MPICH_VERSION\n";
    let expanded = std::fs::write(&source, text).ok().and_then(|()| {
        Command::new(&wrapper)
            .args(["-E", "-P"])
            .arg(&source)
            .stderr(Stdio::inherit())
            .output()
            .ok()
    });
    let Some(expanded) = expanded.filter(|output| output.status.success()) else {
        println!(
            "cargo:warning=cannot preprocess mpi.h with `{wrapper}` (set MPICC to the MPI compiler wrapper): the MPI \
             library in use will not be recognised"
        );
        return "unknown".into();
    };
    String::from_utf8_lossy(&expanded.stdout)
        .lines()
        .find_map(read_name)
        .unwrap_or_else(|| "unknown".into())
}

/// `limnograph_names "Open MPI" = 4 . 1` → `Open MPI 4.1`.
fn read_name(line: &str) -> Option<String> {
    let (name, version) = line
        .trim()
        .strip_prefix("limnograph_names ")?
        .split_once('=')?;
    let bare = |text: &str| text.replace('"', "");
    let version = bare(version).replace(char::is_whitespace, "");
    version
        .starts_with(|c: char| c.is_ascii_digit())
        .then(|| format!("{} {version}", bare(name).trim()))
}
