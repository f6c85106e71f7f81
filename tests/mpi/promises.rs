//! What every rank does, and must find, in each run.

use crate::{allocations, contributions};
use limnograph::team::cells::{Kind, Layout};
use limnograph::team::mpi::{JoinError, MpiTeam, built_against, register_finalise_hook};
use limnograph::team::{Team, TeamError};
use mpi::environment::Universe;
use mpi::ffi;
use mpi::traits::*;
use std::path::{Path, PathBuf};
use std::sync::Mutex;
use std::sync::atomic::{AtomicU32, Ordering};
use std::time::Duration;

/// A promise and the rank counts on which it is tried.
pub struct Promise {
    pub name: &'static str,
    pub ranks: &'static [u32],
    pub keep: fn(&Path),
}

const ANY: &[u32] = &[1, 2, 3, 4];
const SEVERAL: &[u32] = &[2, 3];

pub const PROMISES: &[Promise] = &[
    Promise {
        name: "reductions_give_the_same_bits",
        ranks: ANY,
        keep: reductions_give_the_same_bits,
    },
    Promise {
        name: "two_reductions_may_be_in_flight",
        ranks: ANY,
        keep: two_reductions_may_be_in_flight,
    },
    Promise {
        name: "a_late_rank_is_waited_for",
        ranks: SEVERAL,
        keep: a_late_rank_is_waited_for,
    },
    Promise {
        name: "an_overdue_reduction_can_be_finished_later",
        ranks: SEVERAL,
        keep: overdue,
    },
    Promise {
        name: "a_run_can_be_left_with_a_reduction_in_flight",
        ranks: SEVERAL,
        keep: left_in_flight,
    },
    Promise {
        name: "broadcasts_reach_every_rank",
        ranks: ANY,
        keep: broadcasts_reach_every_rank,
    },
    Promise {
        name: "buffers_of_another_shape_are_noticed",
        ranks: SEVERAL,
        keep: other_shapes_are_noticed,
    },
    Promise {
        name: "bad_communicators_are_refused",
        ranks: &[1, 3],
        keep: bad_communicators_are_refused,
    },
    Promise {
        name: "part_of_the_ranks_can_be_a_team",
        ranks: &[3, 4],
        keep: part_of_the_ranks,
    },
    Promise {
        name: "the_hosts_error_handler_stays",
        ranks: &[2],
        keep: the_hosts_error_handler_stays,
    },
    Promise {
        name: "a_warm_team_allocates_nothing",
        ranks: &[1, 2],
        keep: a_warm_team_allocates_nothing,
    },
    Promise {
        name: "the_finalise_hook_can_still_reduce",
        ranks: ANY,
        keep: the_finalise_hook_can_still_reduce,
    },
    Promise {
        name: "mpi_must_be_alive",
        ranks: &[1],
        keep: mpi_must_be_alive,
    },
];

const LONG: Duration = Duration::from_secs(30);

/// MPI as a host with one thread has it.
fn begin() -> Universe {
    mpi::initialize().expect("this process has not initialised MPI before")
}

fn join(universe: &Universe) -> MpiTeam {
    try_join(&universe.world()).expect("the world can be joined")
}

fn try_join(comm: &impl AsRaw<Raw = ffi::MPI_Comm>) -> Result<MpiTeam, JoinError> {
    let handle = comm.as_raw();
    // SAFETY: the address of a live communicator, and its size.
    unsafe {
        MpiTeam::from_handle(
            (&raw const handle).cast(),
            size_of_val(&handle),
            built_against(),
        )
    }
}

/// Leaves a mark that this rank has done everything.
fn kept(place: &Path, rank: i32) {
    std::fs::write(place.join(format!("kept.{rank}")), "")
        .expect("the place for marks can be written");
}

/// This rank's share of the contributions to one step.
fn share(team: &MpiTeam, step: u64) -> Vec<u64> {
    let (rank, size) = (u64::from(team.rank()), u64::from(team.size()));
    contributions::combined(
        step,
        (0..contributions::CONTRIBUTIONS).filter(|index| index % size == rank),
    )
}

fn reductions_give_the_same_bits(place: &Path) {
    let universe = begin();
    let mut team = join(&universe);
    let (layout, _) = contributions::layout();
    for step in 0..20 {
        let ticket = team.start(share(&team, step)).expect("a reduction starts");
        let cells = team.finish(ticket, LONG).expect("a reduction ends");
        assert!(layout.agrees(&cells));
        assert_eq!(cells, contributions::expected(step), "step {step}");
    }
    team.leave();
    kept(place, universe.world().rank());
}

fn two_reductions_may_be_in_flight(place: &Path) {
    let universe = begin();
    let mut team = join(&universe);
    let mut before = team.start(share(&team, 0)).expect("a reduction starts");
    for step in 1..50 {
        let next = team
            .start(share(&team, step))
            .expect("a second reduction starts");
        assert!(
            team.finish(next, LONG).is_err(),
            "the oldest must be finished first"
        );
        let cells = team.finish(before, LONG).expect("the older one ends");
        assert_eq!(cells, contributions::expected(step - 1));
        assert!(
            team.finish(before, LONG).is_err(),
            "a reduction is finished once"
        );
        before = next;
    }
    while !team.is_complete(before).expect("the last one is in flight") {
        std::thread::yield_now();
    }
    assert_eq!(
        team.finish(before, Duration::ZERO),
        Ok(contributions::expected(49)),
        "complete: no patience needed"
    );
    team.leave();
    assert!(!team.is_usable());
    kept(place, universe.world().rank());
}

fn a_late_rank_is_waited_for(place: &Path) {
    let universe = begin();
    let mut team = join(&universe);
    for step in 0..3 {
        if team.rank() == team.size() - 1 {
            std::thread::sleep(Duration::from_millis(50));
        }
        let ticket = team.start(share(&team, step)).expect("a reduction starts");
        assert_eq!(team.finish(ticket, LONG), Ok(contributions::expected(step)));
    }
    team.leave();
    kept(place, universe.world().rank());
}

/// Waits, without MPI, until another rank has left a file.
fn wait_for(path: PathBuf) {
    while !path.exists() {
        std::thread::sleep(Duration::from_millis(2));
    }
}

fn overdue(place: &Path) {
    let universe = begin();
    let mut team = join(&universe);
    let seen = place.join("overdue");
    if team.rank() == 0 {
        let ticket = team.start(share(&team, 7)).expect("a reduction starts");
        for patience in [0, 1, 20] {
            let result = team.finish(ticket, Duration::from_millis(patience));
            assert_eq!(result, Err(TeamError::Overdue), "nobody else has started");
            assert_eq!(team.is_complete(ticket), Ok(false));
        }
        assert!(team.is_usable(), "being overdue is not a failure");
        std::fs::write(seen, "").expect("the place for marks can be written");
        assert_eq!(team.finish(ticket, LONG), Ok(contributions::expected(7)));
    } else {
        wait_for(seen);
        let ticket = team.start(share(&team, 7)).expect("a reduction starts");
        assert_eq!(team.finish(ticket, LONG), Ok(contributions::expected(7)));
    }
    team.leave();
    kept(place, universe.world().rank());
}

fn left_in_flight(place: &Path) {
    let universe = begin();
    let mut team = join(&universe);
    if team.rank() == 0 {
        let ticket = team.start(share(&team, 0)).expect("a reduction starts");
        assert_eq!(
            team.finish(ticket, Duration::from_millis(1)),
            Err(TeamError::Overdue)
        );
    }
    team.leave();
    assert!(!team.is_usable());
    assert!(team.start(vec![0; 4]).is_err());
    drop(team);
    // The host's own communication is unharmed.
    let world = universe.world();
    world.barrier();
    kept(place, world.rank());
}

fn broadcasts_reach_every_rank(place: &Path) {
    let universe = begin();
    let mut team = join(&universe);
    for root in 0..team.size() {
        for length in [0, 1, 65_536, 65_537, 1_000_000] {
            let sent: Vec<u8> = (0..length)
                .map(|i: u32| (i.wrapping_mul(2_654_435_761) >> 24) as u8)
                .collect();
            let mut bytes = if team.rank() == root {
                sent.clone()
            } else {
                b"what stood here before".to_vec()
            };
            team.broadcast(root, &mut bytes)
                .expect("a broadcast arrives");
            assert!(bytes == sent, "{length} bytes from {root}");
        }
    }
    let outside = team.size();
    assert!(team.broadcast(outside, &mut Vec::new()).is_err());
    assert!(team.is_usable(), "a wrong root is no failure of MPI");
    team.leave();
    kept(place, universe.world().rank());
}

fn other_shapes_are_noticed(place: &Path) {
    let universe = begin();
    let mut team = join(&universe);
    let (mut sums, mut extremes) = (Layout::default(), Layout::default());
    sums.add(Kind::Sum, 1, 5);
    extremes.add(Kind::Max, 1, 5);
    let mine = if team.rank() == 1 { &extremes } else { &sums };
    let mut cells = Vec::new();
    mine.clear(&mut cells);
    let ticket = team.start(cells).expect("a reduction starts");
    let cells = team.finish(ticket, LONG).expect("a reduction ends");
    assert!(
        !sums.agrees(&cells) && !extremes.agrees(&cells),
        "every rank sees that they disagree"
    );
    // Then all agree again, in a buffer of another length.
    let ticket = team.start(share(&team, 3)).expect("a reduction starts");
    assert_eq!(team.finish(ticket, LONG), Ok(contributions::expected(3)));
    assert!(
        team.start(Vec::new()).is_err(),
        "an empty buffer is refused"
    );
    team.leave();
    kept(place, universe.world().rank());
}

fn bad_communicators_are_refused(place: &Path) {
    let universe = begin();
    let world = universe.world();
    let handle = world.as_raw();
    let size = size_of_val(&handle);
    let from = |address: *const ffi::MPI_Comm, size: usize, library: &str| {
        // SAFETY: every call below passes null, or the address of `size` readable bytes of a handle.
        unsafe { MpiTeam::from_handle(address.cast(), size, library).map(|_| ()) }
    };
    let bad = |result: Result<(), JoinError>| matches!(result, Err(JoinError::BadCommunicator(_)));
    let other = |result: Result<(), JoinError>| matches!(result, Err(JoinError::OtherLibrary(_)));
    // SAFETY: a constant.
    let null = unsafe { ffi::RSMPI_COMM_NULL };
    assert!(bad(from(std::ptr::null(), size, "")));
    assert!(bad(from(&raw const null, size, "")));
    assert!(other(from(&raw const handle, size / 2, "")));
    assert!(other(from(&raw const handle, 0, "")));
    assert!(other(from(&raw const handle, size, "Some other MPI 9.9")));
    for fortran in [-1, i32::MAX, i32::MIN, 54_321] {
        assert!(
            bad(MpiTeam::from_fortran(fortran, "").map(|_| ())),
            "{fortran}"
        );
    }
    if world.size() > 1 {
        assert!(bad(between_groups(&world)));
    }
    // A good one in both forms, after all that.
    // SAFETY: the world is a live communicator.
    let fortran = unsafe { ffi::RSMPI_Comm_c2f(handle) };
    let mut team = MpiTeam::from_fortran(fortran, "").expect("the world can be joined");
    assert_eq!(
        (team.rank() as i32, team.size() as i32),
        (world.rank(), world.size())
    );
    team.leave();
    kept(place, world.rank());
}

/// Tries a communicator that joins rank 0 with all others.
fn between_groups(world: &impl Communicator) -> Result<(), JoinError> {
    let (mine, leader) = if world.rank() == 0 { (0, 1) } else { (1, 0) };
    let group = world
        .split_by_color(mpi::topology::Color::with_value(mine))
        .expect("every rank has a colour");
    // SAFETY: both communicators are live; the new one is written to this frame and freed below.
    unsafe {
        let mut joined = ffi::RSMPI_COMM_NULL;
        ffi::MPI_Intercomm_create(
            group.as_raw(),
            0,
            world.as_raw(),
            leader,
            5,
            &raw mut joined,
        );
        let result =
            MpiTeam::from_handle((&raw const joined).cast(), size_of_val(&joined), "").map(|_| ());
        ffi::MPI_Comm_free(&raw mut joined);
        result
    }
}

fn part_of_the_ranks(place: &Path) {
    let universe = begin();
    let world = universe.world();
    // One rank takes no part at all; two teams reduce side by side on the others.
    if world.rank() == 0 {
        world.split_by_color(mpi::topology::Color::undefined());
    } else {
        let part = world
            .split_by_color(mpi::topology::Color::with_value(1))
            .expect("this rank has a colour");
        let mut teams = [
            try_join(&part).expect("a part can be joined"),
            try_join(&part).expect("twice"),
        ];
        let tickets = teams
            .each_mut()
            .map(|team| team.start(share(team, 11)).expect("a reduction starts"));
        for (team, ticket) in teams.iter_mut().zip(tickets).rev() {
            assert_eq!(team.finish(ticket, LONG), Ok(contributions::expected(11)));
            team.leave();
        }
    }
    kept(place, world.rank());
}

fn the_hosts_error_handler_stays(place: &Path) {
    let universe = begin();
    let world = universe.world();
    // SAFETY: the world is a live communicator; the handler is written to this frame and given back.
    let handler = || unsafe {
        let mut handler: ffi::MPI_Errhandler = std::mem::zeroed();
        ffi::MPI_Comm_get_errhandler(world.as_raw(), &raw mut handler);
        let seen = handler;
        ffi::MPI_Errhandler_free(&raw mut handler);
        seen
    };
    let before = handler();
    let mut team = join(&universe);
    assert!(before == handler());
    team.leave();
    assert!(before == handler());
    kept(place, world.rank());
}

fn a_warm_team_allocates_nothing(place: &Path) {
    let universe = begin();
    let mut team = join(&universe);
    let mut cells = share(&team, 0);
    let mut hundred = |team: &mut MpiTeam| {
        for _ in 0..100 {
            let older = team
                .start(std::mem::take(&mut cells))
                .expect("a reduction starts");
            cells = team.finish(older, LONG).expect("a reduction ends");
        }
    };
    hundred(&mut team);
    let before = allocations::so_far();
    hundred(&mut team);
    assert_eq!(allocations::so_far() - before, 0);
    team.leave();
    kept(place, universe.world().rank());
}

/// What the hook of the next promise closes: the run left open, and where to leave the mark.
static LEFT_OPEN: Mutex<Option<(MpiTeam, PathBuf)>> = Mutex::new(None);

static HOOK_CALLS: AtomicU32 = AtomicU32::new(0);

fn close_what_is_open() {
    HOOK_CALLS.fetch_add(1, Ordering::Relaxed);
    let Some((mut team, place)) = LEFT_OPEN.lock().ok().and_then(|mut open| open.take()) else {
        panic!("nothing is open");
    };
    assert!(team.is_usable(), "communication is still allowed");
    let ticket = team.start(share(&team, 5)).expect("a reduction starts");
    assert_eq!(team.finish(ticket, LONG), Ok(contributions::expected(5)));
    let rank = team.rank() as i32;
    team.leave();
    kept(&place, rank);
    panic!("a panic in the hook must not reach MPI");
}

fn the_finalise_hook_can_still_reduce(place: &Path) {
    let universe = begin();
    let team = join(&universe);
    // The first is replaced by the second, and registering twice calls it once.
    register_finalise_hook(|| std::process::abort()).expect("MPI takes a hook");
    register_finalise_hook(close_what_is_open).expect("MPI takes a hook");
    register_finalise_hook(close_what_is_open).expect("MPI takes a hook");
    *LEFT_OPEN.lock().expect("not poisoned") = Some((team, place.to_path_buf()));
    drop(universe);
    assert!(
        LEFT_OPEN
            .lock()
            .expect("the hook let go of it before it panicked")
            .is_none()
    );
}

fn mpi_must_be_alive(place: &Path) {
    let zero = 0usize;
    let address = (&raw const zero).cast();
    // SAFETY: the bytes are readable, and must not be looked at before MPI is known to be alive.
    let join =
        || unsafe { MpiTeam::from_handle(address, size_of::<ffi::MPI_Comm>(), "").map(|_| ()) };
    assert_eq!(join(), Err(JoinError::NotInitialised));
    assert!(register_finalise_hook(|| ()).is_err());
    let universe = begin();
    assert!(matches!(join(), Err(JoinError::BadCommunicator(_))));
    let mut team = try_join(&universe.world()).expect("the world can be joined");
    // A host with one thread calls from that thread.
    std::thread::scope(|scope| {
        let elsewhere = scope.spawn(|| MpiTeam::from_fortran(0, "").map(|_| ()));
        assert_eq!(
            elsewhere.join().expect("no panic"),
            Err(JoinError::WrongThread)
        );
    });
    drop(universe);
    assert_eq!(join(), Err(JoinError::Finalised));
    assert!(!team.is_usable());
    assert!(team.start(vec![0; 4]).is_err());
    team.leave();
    kept(place, 0);
}
