//! The program `limnograph`: looks at series, and at configs before a run begins.

mod audit;
mod export;
mod format;
mod gauges;
mod items;
mod lint;
mod notes;
mod open;
mod screen;
mod sight;
mod trend;

use clap::{Args, Parser, Subcommand, ValueEnum};
use open::Failure;
use screen::Screen;
use std::io::{self, BufWriter, Write};
use std::path::PathBuf;
use std::process::ExitCode;

/// A series is what a host with the library linked in leaves behind: a directory NAME.limno with a row for
/// every measured step. It can be looked at while the host still writes it.
#[derive(Parser)]
#[command(
    name = "limnograph",
    version,
    about = "Look at the time series of a simulation run",
    long_about
)]
#[command(after_help = EXIT_CODES, arg_required_else_help = true)]
struct Arguments {
    #[command(subcommand)]
    command: Command,
}

const EXIT_CODES: &str = "\
Exit codes:
  0  done; for audit: the series is whole; for lint: the config is right
  1  audit found damage; lint found problems
  2  wrong usage, or something cannot be opened, read or written";

#[derive(Subcommand)]
enum Command {
    Sight(Sight),
    Export(Export),
    Audit(Audit),
    Lint(Lint),
}

/// Show on one screen where a run stands
///
/// The host's clock, every gauge's latest values with their units and how they went, and what the library
/// costs the host. Works while the host runs. What was not measured says so, with the reason when one is known.
///
/// A value with a plus sign is what was added since the row before. The small curve runs from the first row to
/// the last and from the lowest value to the highest, logarithmically when they are a factor of 1000 apart.
#[derive(Args)]
#[command(after_help = "\
Example:
  limnograph sight saltmarsh.limno
  limnograph sight --all saltmarsh.limno | less

Without a terminal it is 80 columns by 24 lines, or what COLUMNS and LINES say; no colours then, nor with NO_COLOR.")]
struct Sight {
    /// The series: a directory NAME.limno
    series: PathBuf,
    /// Every column of every gauge, however long that is
    #[arg(long)]
    all: bool,
    /// Nothing but ASCII characters
    #[arg(long)]
    ascii: bool,
}

/// Write a table of a series in a format that other programs read
///
/// CSV as RFC 4180 has it but for plain line ends, one line a row, the first with names and units: `time [Gyr]`; a pure number has its
/// name alone. A vector takes a cell for each of its values: `name.0`, `name.1`, … Numbers are the shortest that
/// read back to the same bits; null is an empty cell, an empty text is "", a NaN is nan, infinities are inf
/// and -inf. Rows that a later leg did over again are left out, unless --all-legs is given.
#[derive(Args)]
#[command(after_help = "\
Example:
  limnograph export saltmarsh.limno --to csv -o saltmarsh.csv
  limnograph export saltmarsh.limno --to csv --table wind_shells | head

In Python: pandas.read_csv(\"saltmarsh.csv\")[\"star_formation_rate_density [solMass.yr**-1.Mpc**-3]\"];
astropy.units reads what stands in the brackets.")]
struct Export {
    /// The series: a directory NAME.limno
    series: PathBuf,
    /// The format
    #[arg(long = "to", value_enum)]
    to: Form,
    /// Where to write; to standard output when not given
    #[arg(short, long, value_name = "FILE")]
    output: Option<PathBuf>,
    /// The table; audit lists them
    #[arg(long, value_name = "NAME", default_value = "run")]
    table: String,
    /// Also rows that a later leg did over again; two columns are added: leg, superseded (0 or 1)
    #[arg(long)]
    all_legs: bool,
}

#[derive(Clone, Copy, ValueEnum)]
enum Form {
    /// Comma-separated values
    Csv,
}

/// Tell whether a series is whole
///
/// In plain words: its legs, tables and files, rows done over again after a restart, gaps with their reasons,
/// and what is damaged, byte by byte. Nothing is changed. A series is damaged when bytes of it cannot be read,
/// or when rows are missing and it does not say why; the last row of a host that was killed while it wrote
/// counts as well. A gap that the series tells of (the disk was full) is no damage.
#[derive(Args)]
#[command(after_help = "\
Example:
  limnograph audit saltmarsh.limno && echo whole

Exit codes: 0 whole, 1 damaged, 2 it cannot be opened.")]
struct Audit {
    /// The series: a directory NAME.limno
    series: PathBuf,
}

/// Check a config before a run
///
/// Says what the library would understand: units, what is switched on, and the columns that come of it. Or
/// what is wrong, with file and line.
#[derive(Args)]
#[command(after_help = "\
Example:
  limnograph lint limnograph.toml

Exit codes: 0 right, 1 problems, 2 it cannot be read.")]
struct Lint {
    /// The config, usually limnograph.toml
    config: PathBuf,
}

fn main() -> ExitCode {
    let arguments = Arguments::parse();
    match run(&arguments.command) {
        Ok(code) => ExitCode::from(code),
        // Whoever read us has seen enough.
        Err(Failure::Output(error)) if error.kind() == io::ErrorKind::BrokenPipe => {
            ExitCode::SUCCESS
        }
        Err(failure) => {
            let _ = writeln!(io::stderr(), "limnograph: {failure}");
            ExitCode::from(2)
        }
    }
}

fn run(command: &Command) -> Result<u8, Failure> {
    let mut out = BufWriter::new(io::stdout().lock());
    let code = match command {
        Command::Sight(given) => {
            let reader = open::settled(&given.series)?;
            sight::show(
                &reader,
                &Screen::of_terminal(given.ascii, given.all),
                &mut out,
            )?;
            0
        }
        Command::Export(given) => {
            let reader = open::settled(&given.series)?;
            let Form::Csv = given.to;
            match &given.output {
                None => export::csv(&reader, &given.table, given.all_legs, &mut out)?,
                Some(path) => export::csv_to_file(&reader, &given.table, given.all_legs, path)?,
            }
            0
        }
        Command::Audit(given) => audit::tell(&open::settled(&given.series)?, &mut out)?,
        Command::Lint(given) => lint::check(&given.config, &mut out)?,
    };
    out.flush()?;
    Ok(code)
}
