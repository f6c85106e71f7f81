//! Opening a run: one rank reads the config, all build the same gauges, and all succeed or none.

use super::Run;
use super::contribution::Words;
use super::core::{Core, Parts};
use super::history::History;
use super::rows::{self, Scribe};
use super::status::{Fault, Status};
use crate::config::{Config, Problem};
use crate::gauges::{self, Plan, TallyBook};
use crate::series::{Opening, Series};
use crate::sweep::Sweep;
use crate::team::cells::{Kind, Layout};
use crate::team::{Team, TeamError};
use std::io::Read;
use std::path::Path;
use std::sync::{Arc, Mutex, OnceLock};
use std::time::Duration;

/// How long a rank waits for the others to open.
const PATIENCE: Duration = Duration::from_secs(600);
/// Problems of a config that an error text lists.
const LISTED_PROBLEMS: usize = 8;
/// Bytes of a config that are read; the parser refuses more than it can be.
const MOST_BYTES: u64 = 2 << 20;
/// Bytes of a fault's text that reach the other ranks.
const TEXT_BYTES: usize = 4096;

/// Where the config comes from.
#[derive(Clone, Debug)]
pub struct ConfigSource {
    /// Its path, or the name it has in messages when the text is given.
    pub path: String,
    /// The text itself, where the host has it.
    pub text: Option<String>,
}

/// What a host asks for when it opens a run. That of rank 0 counts, except the threads.
#[derive(Clone, Debug)]
pub struct Request {
    /// The config.
    pub config: ConfigSource,
    /// The series directory.
    pub series: String,
    /// What the host says of itself.
    pub host_name: String,
    /// Its version.
    pub host_version: String,
    /// What tells this run from others.
    pub description: String,
    /// Threads that measure; 0: as the config says.
    pub threads: usize,
    /// What is wrong with this rank's arguments: it fails the opening on every rank.
    pub fault: Option<Fault>,
    /// Does it say where the config and the series are? Only rank 0 must.
    pub is_complete: bool,
}

/// Opens a run. Collective over the team; every rank gets the same answer.
///
/// # Errors
/// Wrong arguments on any rank, a config that cannot be read or is wrong, a series that cannot be opened.
pub fn open(mut team: Box<dyn Team>, request: Request) -> Result<Run, Fault> {
    let result = open_steps(&mut team, &request);
    match result {
        Ok((prepared, series, history)) => Ok(prepared.into_run(team, series, history)),
        Err(fault) => {
            team.leave();
            Err(fault)
        }
    }
}

fn open_steps(
    team: &mut Box<dyn Team>,
    request: &Request,
) -> Result<(Prepared, Option<Series>, History), Fault> {
    let is_first = team.rank() == 0;
    let config = share_config(team.as_mut(), request)?;
    let own = match request_fault(is_first, request) {
        Some(fault) => Err(fault),
        None => config.and_then(|(path, text)| Prepared::new(&path, &text, request.threads)),
    };
    let prepared = agree(team.as_mut(), own)?;
    let mut history = if is_first {
        History::read(Path::new(&request.series))
    } else {
        History::default()
    };
    let series = if is_first {
        open_series(&prepared, request).map(Some)
    } else {
        Ok(None)
    };
    let series = agree(team.as_mut(), series)?;
    if team.size() > 1 {
        let mut bytes = history.to_bytes();
        team.broadcast(0, &mut bytes)
            .map_err(|error| lost(&error))?;
        if !is_first {
            history = History::from_bytes(&bytes);
        }
    }
    Ok((prepared, series, history))
}

/// What is wrong with a rank's arguments; only rank 0 must say where config and series are.
fn request_fault(is_first: bool, request: &Request) -> Option<Fault> {
    if request.fault.is_none() && is_first && !request.is_complete {
        let text =
            "`config` or `series` is null; give the path of the config and of the series to write";
        return Some(Fault::new(Status::BadArgument, text));
    }
    request.fault.clone()
}

/// Rank 0 reads the config and sends it; every rank gets its name and text, or the same error.
fn share_config(
    team: &mut dyn Team,
    request: &Request,
) -> Result<Result<(String, String), Fault>, Fault> {
    let mut bytes = Vec::new();
    let mut own = Ok(());
    if team.rank() == 0 {
        match read_config(request) {
            Ok(text) => {
                bytes.extend((request.config.path.len() as u64).to_le_bytes());
                bytes.extend(request.config.path.bytes());
                bytes.extend(text.bytes());
            }
            Err(fault) => own = Err(fault),
        }
    }
    team.broadcast(0, &mut bytes)
        .map_err(|error| lost(&error))?;
    if let Err(fault) = own {
        return Ok(Err(fault));
    }
    let parts = bytes.split_at_checked(8).and_then(|(length, rest)| {
        let length = u64::from_le_bytes(length.try_into().ok()?) as usize;
        let (path, text) = rest.split_at_checked(length)?;
        Some((
            String::from_utf8_lossy(path).into_owned(),
            String::from_utf8_lossy(text).into_owned(),
        ))
    });
    // Without a text rank 0 has failed; its words arrive when the ranks agree.
    Ok(parts.ok_or_else(|| Fault::new(Status::BadConfig, "")))
}

fn read_config(request: &Request) -> Result<String, Fault> {
    if let Some(fault) = request_fault(true, request) {
        return Err(fault);
    }
    if let Some(text) = &request.config.text {
        return Ok(text.clone());
    }
    let path = &request.config.path;
    // What goes on beyond the largest config, such as a device, is refused by its length when it is parsed.
    let mut bytes = Vec::new();
    std::fs::File::open(path)
        .and_then(|file| file.take(MOST_BYTES).read_to_end(&mut bytes))
        .map_err(|error| {
            Fault::new(
                Status::BadConfig,
                format!(
                    "the config {path:?} cannot be read: {error}; give the path of a limnograph.toml"
                ),
            )
        })?;
    String::from_utf8(bytes).map_err(|_| {
        Fault::new(
            Status::BadConfig,
            format!("the config {path:?} is not UTF-8 text"),
        )
    })
}

/// All ranks learn whether all succeeded; if not, all get the fault of the lowest rank that has something to say.
fn agree<T>(team: &mut dyn Team, own: Result<T, Fault>) -> Result<T, Fault> {
    if team.size() == 1 {
        return own;
    }
    let mut layout = Layout::default();
    let failed = layout.add(Kind::Sum, 1, 1);
    let said = layout.add(Kind::Word, 2 + TEXT_BYTES / 8, 1);
    let mut buffer = Vec::new();
    layout.clear(&mut buffer);
    if let Err(fault) = &own {
        buffer[layout.range(failed)][0] = 1;
        let cells = &mut buffer[layout.range(said)];
        // Rank 0's failure to read the config leaves the others with nothing to say: they come last.
        let urgency = if fault.text.is_empty() { 1 } else { 2 };
        cells[0] = urgency << 32 | u64::from(u32::MAX - team.rank());
        let end = fault.text.floor_char_boundary(TEXT_BYTES);
        cells[1] = (fault.status as u64) << 32 | end as u64;
        let bytes: &mut [u8] = bytemuck::cast_slice_mut(&mut cells[2..]);
        bytes[..end].copy_from_slice(&fault.text.as_bytes()[..end]);
    }
    let ticket = team.start(buffer).map_err(|error| lost(&error))?;
    let combined = team
        .finish(ticket, PATIENCE)
        .map_err(|error| lost(&error))?;
    if !layout.agrees(&combined) {
        return Fault::err(
            Status::Internal,
            "the ranks run different versions of this library",
        );
    }
    if combined[layout.range(failed)][0] == 0 {
        return own;
    }
    let cells = &combined[layout.range(said)];
    let rank = u32::MAX - cells[0] as u32;
    let status = Status::from_number((cells[1] >> 32) as i32).unwrap_or(Status::Internal);
    let bytes: &[u8] = bytemuck::cast_slice(&cells[2..]);
    let bytes = &bytes[..bytes.len().min(cells[1] as u32 as usize)];
    let text = String::from_utf8_lossy(bytes);
    Fault::err(
        status,
        if rank == 0 {
            text.into_owned()
        } else {
            format!("rank {rank}: {text}")
        },
    )
}

fn lost(error: &TeamError) -> Fault {
    match error {
        TeamError::Failed(text) => Fault::new(
            Status::BadMpi,
            format!("the ranks cannot communicate: {text}"),
        ),
        TeamError::Overdue => Fault::new(
            Status::BadMpi,
            format!(
                "the other ranks did not open the run within {} s; opening is collective",
                PATIENCE.as_secs()
            ),
        ),
    }
}

/// Everything a run needs but its team and its series.
struct Prepared {
    config: Config,
    plan: Plan,
    gauges: Vec<gauges::Active>,
    sweep: Sweep,
    words: Words,
}

impl Prepared {
    fn new(path: &str, text: &str, threads: usize) -> Result<Prepared, Fault> {
        let config = Config::parse(text, path).map_err(|problems| bad_config(&problems))?;
        let mut plan = Plan::new(rows::own_tables(&config));
        let gauges = gauges::build(&config, &mut plan).map_err(|problems| bad_config(&problems))?;
        let words = Words::new(&plan);
        plan.tables[0].columns.extend(rows::closing_columns(&words));
        let threads = if threads > 0 {
            threads
        } else {
            config.sweep_threads
        };
        let sweep = Sweep::new(&plan, config.elements.len(), threads)
            .map_err(|text| Fault::new(Status::NoMemory, text))?;
        Ok(Prepared {
            config,
            plan,
            gauges,
            sweep,
            words,
        })
    }

    fn into_run(self, team: Box<dyn Team>, series: Option<Series>, history: History) -> Run {
        let Prepared {
            config,
            plan,
            gauges,
            sweep,
            words,
        } = self;
        let tallies = Arc::new(Mutex::new(TallyBook::new(&config)));
        let sleeps = Arc::new(OnceLock::new());
        let history = Arc::new(history);
        let scribe = series.map(|series| Scribe::new(series, history.clone()));
        Run::new(
            Core::new(Parts {
                team,
                config,
                plan,
                gauges,
                sweep,
                words,
                scribe,
                history,
                tallies: tallies.clone(),
                sleeps: sleeps.clone(),
            }),
            tallies,
            sleeps,
        )
    }
}

fn bad_config(problems: &[Problem]) -> Fault {
    let mut lines: Vec<String> = problems
        .iter()
        .take(LISTED_PROBLEMS)
        .map(ToString::to_string)
        .collect();
    if problems.len() > LISTED_PROBLEMS {
        lines.push(format!(
            "and {} more; `limnograph lint` lists all",
            problems.len() - LISTED_PROBLEMS
        ));
    }
    Fault::new(Status::BadConfig, lines.join("\n"))
}

/// What the numbers of the series rest on: kept in its manifest for people and programs.
fn setting(config: &Config) -> serde_json::Value {
    let cosmology = config.expansion.cosmology().map(|cosmology| {
        let parameters = cosmology.parameters();
        serde_json::json!({
            "hubble_km_s_mpc": 100.0 * cosmology.h(),
            "omega_matter": parameters.omega_matter,
            "omega_lambda": parameters.omega_lambda,
            "omega_radiation": parameters.omega_radiation,
            "w": parameters.w,
        })
    });
    serde_json::json!({
        "units": config.statements(),
        "cosmology": cosmology,
        "comoving_volume_mpc3": config.comoving_volume_mpc3(),
        "imf": config.imf.as_ref().map(|imf| format!("{:?}", imf.name)),
        "return_fraction": config.imf.as_ref().and_then(|imf| imf.return_fraction),
        "description": config.description,
    })
}

fn open_series(prepared: &Prepared, request: &Request) -> Result<Series, Fault> {
    let opening = Opening {
        schema: crate::series::schema::Schema {
            tables: prepared.plan.tables.clone(),
        },
        config_text: prepared.config.text.clone(),
        host: serde_json::json!({
            "name": request.host_name,
            "version": request.host_version,
            "description": request.description,
        }),
        library_version: env!("CARGO_PKG_VERSION").to_string(),
        setting: setting(&prepared.config),
        time_column: "time".to_string(),
        ..Opening::default()
    };
    Series::open(&request.series, opening).map_err(|error| rows::fault(&error))
}
