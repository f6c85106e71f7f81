//! Writes an invented series, to have something to look at:
//! `cargo run --example invented_series -- target/saltmarsh.limno [STEPS]`, then
//! `cargo run -- sight target/saltmarsh.limno`.

#[path = "../tests/common/mod.rs"]
mod common;

fn main() {
    let mut arguments = std::env::args().skip(1);
    let (Some(path), steps) = (arguments.next(), arguments.next()) else {
        eprintln!("usage: invented_series PATH [STEPS]");
        std::process::exit(2);
    };
    let steps = steps.and_then(|text| text.parse().ok()).unwrap_or(400);
    common::write_leg(std::path::Path::new(&path), 0..steps);
}
