//! The exported functions, in the order in which a host meets them.

use super::arguments::{
    List, checked_array, checked_clock, checked_tally, listed, needed_text, options_of, place_for,
    text, write_out, write_standing,
};
use super::boundary::{enter_run, opening, plain};
use super::registry;
use super::types::{Array, Clock, LimnoRun, Options, Scalar, Standing, Tally};
use crate::lend::{ArrayShape, Lent};
use crate::run::{Fault, Status};
use std::ffi::{c_char, c_void};

/// The version of this header, major × 10000 + minor × 100 + patch. limno_open takes it so that a host built
/// with another header is told so.
pub const LIMNO_VERSION: u32 = 100;

/// The library's version, in the same form as LIMNO_VERSION.
#[unsafe(no_mangle)]
pub extern "C" fn limno_version() -> u32 {
    LIMNO_VERSION
}

/// Opens a run of one process alone. No MPI is needed to build or run.
///
/// `header_version`  LIMNO_VERSION
/// `config`          path of the config file, e.g. "limnograph.toml"
/// `series`          path of the series to write, a directory whose name ends in ".limno"; made if it is not
///                   there; otherwise a new leg of it begins
/// `options`         what else the host wants to say, or NULL
/// `run`             receives the handle; NULL on failure, which no call will trip over
///
/// On failure the text is at hand with limno_last_error(NULL).
///
/// # Safety
/// Pointers must be valid or NULL.
#[unsafe(no_mangle)]
pub unsafe extern "C" fn limno_open(
    header_version: u32,
    config: *const c_char,
    series: *const c_char,
    options: *const Options,
    run: *mut *mut LimnoRun,
) -> Status {
    opening(run, || {
        // SAFETY: the host's duty, stated above.
        let request = unsafe { options_of(header_version, config, series, options, run) };
        registry::open_alone(request)
    })
}

/// Opens a run over the processes of a communicator, which is duplicated. Collective: every process of the
/// communicator calls it, and all get the same answer. Use limno_open_mpi of limnograph_mpi.h, which fills in
/// the last three arguments.
///
/// `config`, `series` and `options` of rank 0 count; the others' may be NULL (their threads count each for
/// itself).
/// `communicator`        address of an MPI_Comm
/// `communicator_bytes`  sizeof(MPI_Comm)
/// `mpi`                 what mpi.h says of itself, or NULL
///
/// # Safety
/// Pointers must be valid or NULL, and the communicator valid.
#[unsafe(no_mangle)]
pub unsafe extern "C" fn limno_open_communicator(
    header_version: u32,
    config: *const c_char,
    series: *const c_char,
    options: *const Options,
    communicator: *const c_void,
    communicator_bytes: usize,
    mpi: *const c_char,
    run: *mut *mut LimnoRun,
) -> Status {
    opening(run, || {
        // SAFETY: the host's duty, stated above.
        let mut request = unsafe { options_of(header_version, config, series, options, run) };
        // SAFETY: as above.
        let mpi = unsafe { text("mpi", mpi) }.unwrap_or_else(|fault| {
            // The other ranks must hear of it.
            request.fault.get_or_insert(fault);
            None
        });
        registry::open_communicator(request, communicator, communicator_bytes, mpi.unwrap_or(""))
    })
}

/// As limno_open_communicator, with a Fortran communicator handle (the integer of `use mpi`, or comm%MPI_VAL of
/// `use mpi_f08`).
///
/// # Safety
/// Pointers must be valid or NULL, and the communicator valid.
#[unsafe(no_mangle)]
pub unsafe extern "C" fn limno_open_fortran(
    header_version: u32,
    config: *const c_char,
    series: *const c_char,
    options: *const Options,
    communicator: i32,
    run: *mut *mut LimnoRun,
) -> Status {
    opening(run, || {
        // SAFETY: the host's duty, stated above.
        let request = unsafe { options_of(header_version, config, series, options, run) };
        registry::open_fortran(request, communicator)
    })
}

/// Asks whether a step with this clock would be measured: then `*due` becomes 1, else 0. A host can save itself
/// the trouble of preparing arrays for a step that is not. Not collective; changes nothing; call it before
/// limno_mark.
///
/// # Safety
/// Pointers must be valid or NULL.
#[unsafe(no_mangle)]
pub unsafe extern "C" fn limno_due(
    run: *const LimnoRun,
    clock: *const Clock,
    due: *mut i32,
) -> Status {
    enter_run(run, |run| {
        // SAFETY: the host's duty, stated above.
        let clock = unsafe { checked_clock(clock) }.map_err(|refusal| refusal.fault)?;
        let answer = run.is_due(&clock)?;
        // SAFETY: as above.
        unsafe { write_out("due", due, i32::from(answer)) }
    })
}

/// A step begins: here is its clock. Costs next to nothing when the step is not due to be measured, and so do
/// the calls up to limno_enter.
///
/// # Safety
/// Pointers must be valid or NULL.
#[unsafe(no_mangle)]
pub unsafe extern "C" fn limno_mark(run: *mut LimnoRun, clock: *const Clock) -> Status {
    enter_run(run, |run| {
        // SAFETY: the host's duty, stated above.
        let clock = unsafe { checked_clock(clock) };
        run.mark(clock)
    })
}

/// Lends an array of one number an element: `count` numbers of type `scalar` (a limno_scalar), `stride` bytes
/// from one to the next (0: one value for all).
///
/// The array must stay as it is until its species is sounded or the step is entered. It is only read. Every
/// field of a species must be lent with the same count, also a count of 0 (data may then be NULL). What no
/// gauge reads costs nothing. Names of species and fields are listed at the top of this header.
///
/// # Safety
/// `count` numbers must be readable as described, until the species is sounded or the step entered.
#[unsafe(no_mangle)]
pub unsafe extern "C" fn limno_lend(
    run: *mut LimnoRun,
    species: *const c_char,
    field: *const c_char,
    data: *const c_void,
    count: usize,
    stride: isize,
    scalar: i32,
) -> Status {
    let array = packed(1, data, stride, scalar);
    // SAFETY: passed on.
    unsafe { limno_lend_array(run, species, field, &raw const array, count) }
}

/// Lends a vector field whose three components stand next to each other: x, y, z, then the next element
/// `stride` bytes further. Otherwise as limno_lend.
///
/// # Safety
/// As limno_lend, for three numbers an element.
#[unsafe(no_mangle)]
pub unsafe extern "C" fn limno_lend_vector(
    run: *mut LimnoRun,
    species: *const c_char,
    field: *const c_char,
    data: *const c_void,
    count: usize,
    stride: isize,
    scalar: i32,
) -> Status {
    let array = packed(3, data, stride, scalar);
    // SAFETY: passed on.
    unsafe { limno_lend_array(run, species, field, &raw const array, count) }
}

/// Lends a vector field whose components are three arrays. Otherwise as limno_lend.
///
/// # Safety
/// As limno_lend, for each of the arrays.
#[unsafe(no_mangle)]
pub unsafe extern "C" fn limno_lend_xyz(
    run: *mut LimnoRun,
    species: *const c_char,
    field: *const c_char,
    x: *const c_void,
    y: *const c_void,
    z: *const c_void,
    count: usize,
    stride: isize,
    scalar: i32,
) -> Status {
    let arrays = [x, y, z];
    let array = Array {
        arrays: arrays.as_ptr(),
        ..packed(3, std::ptr::null(), stride, scalar)
    };
    // SAFETY: passed on.
    unsafe { limno_lend_array(run, species, field, &raw const array, count) }
}

/// Lends a field laid out in any way that limno_array describes. Otherwise as limno_lend.
///
/// # Safety
/// As limno_lend.
#[unsafe(no_mangle)]
pub unsafe extern "C" fn limno_lend_array(
    run: *mut LimnoRun,
    species: *const c_char,
    field: *const c_char,
    array: *const Array,
    count: usize,
) -> Status {
    enter_run(run, |run| {
        // SAFETY: the host's duty, stated above.
        let (species, field) =
            unsafe { (needed_text("species", species), needed_text("field", field)) };
        let (species, field) = match (species, field) {
            (Ok(species), Ok(field)) => (species, field),
            (species, Err(fault)) => return run.lend_unnamed(species.ok(), fault),
            (Err(fault), _) => return run.lend_unnamed(None, fault),
        };
        // SAFETY: as above.
        let array = unsafe { checked_array(array, List::Read(run.components_of(field))) };
        run.lend(
            species,
            field,
            count,
            array.map(|array| (array.shape, array.lent())),
        )
    })
}

/// Describes a layout once, so that later steps need only pointers: `*layout` receives its number, which is
/// valid as long as the run. Pointers in `array` are not followed.
///
/// # Safety
/// Pointers must be valid or NULL.
#[unsafe(no_mangle)]
pub unsafe extern "C" fn limno_describe(
    run: *mut LimnoRun,
    species: *const c_char,
    field: *const c_char,
    array: *const Array,
    layout: *mut i32,
) -> Status {
    enter_run(run, |run| {
        // SAFETY: the host's duty, stated above.
        let (species, field, array) = unsafe {
            (
                needed_text("species", species)?,
                needed_text("field", field)?,
                checked_array(array, List::Ignored)?,
            )
        };
        // Before anything is kept, so that a layout that nobody knows the number of is not.
        place_for("layout", layout)?;
        let number = run.describe(species, field, array.shape, array.is_separate())?;
        // SAFETY: as above.
        unsafe { write_out("layout", layout, number) }
    })
}

/// Lends with a layout described before: `data` is the new address of the first number. Otherwise as limno_lend.
///
/// # Safety
/// As limno_lend.
#[unsafe(no_mangle)]
pub unsafe extern "C" fn limno_lend_again(
    run: *mut LimnoRun,
    layout: i32,
    data: *const c_void,
    count: usize,
) -> Status {
    enter_run(run, |run| {
        run.lend_again(layout, count, Lent::Interleaved(data as usize))
    })
}

/// Lends with a layout described with `arrays`: one new pointer per component. Otherwise as limno_lend.
///
/// # Safety
/// As limno_lend; `arrays` must hold as many pointers as the layout has components.
#[unsafe(no_mangle)]
pub unsafe extern "C" fn limno_lend_again_arrays(
    run: *mut LimnoRun,
    layout: i32,
    arrays: *const *const c_void,
    count: usize,
) -> Status {
    enter_run(run, |run| {
        let components = run.arrays_of(layout)?;
        if arrays.is_null() {
            return run.lend_refused(
                layout,
                "`arrays` is null; give one pointer per component".to_string(),
            );
        }
        // The list of a layout without arrays is not read; the layout is refused.
        // SAFETY: the host's duty, stated above: as many pointers as the layout has components.
        match unsafe { listed(arrays, components.unwrap_or(0)) } {
            Ok(addresses) => run.lend_again(layout, count, Lent::Arrays(addresses)),
            Err(fault) => run.lend_refused(layout, fault.text),
        }
    })
}

/// Posts a batch of events. May be called at any time after limno_open and from any thread; amounts add up until
/// the next row, over steps that are not measured too. Give each event on one rank only.
///
/// # Safety
/// Pointers must be valid or NULL.
#[unsafe(no_mangle)]
pub unsafe extern "C" fn limno_tally(run: *mut LimnoRun, batch: *const Tally) -> Status {
    enter_run(run, |run| {
        // SAFETY: the host's duty, stated above. The elements' number is the run's own.
        let (channel, batch) = unsafe { checked_tally(batch, run.elements()) }?;
        run.tally(channel, &batch)
    })
}

/// Measures now what has been lent of a species and lets go of its arrays: for hosts whose arrays are scratch
/// memory or change within the step. May be called several times a step with different arrays: the step's row
/// holds the sum. The reduction still happens once, in limno_enter. Not collective.
///
/// # Safety
/// What was lent must still be readable.
#[unsafe(no_mangle)]
pub unsafe extern "C" fn limno_sound(run: *mut LimnoRun, species: *const c_char) -> Status {
    enter_run(run, |run| {
        // SAFETY: the host's duty, stated above.
        let species = unsafe { needed_text("species", species) }?;
        run.sound(species)
    })
}

/// The step is over: sounds what is still lent, lets go of every array, reduces, and enters the row in the log.
/// Collective on steps that are due: every rank calls it, with the same step.
///
/// Rows are completed up to two measured steps later, so that no rank waits for another; limno_close, limno_flush,
/// and steps marked as checkpoint, complete all. What concerns all ranks alike, such as LIMNO_ASLEEP, is answered
/// from the same step on by every rank: the second measured step after the one that it follows from, or at a flush.
///
/// # Safety
/// What was lent must still be readable.
#[unsafe(no_mangle)]
pub unsafe extern "C" fn limno_enter(run: *mut LimnoRun) -> Status {
    enter_run(run, |run| run.enter())
}

/// Completes the rows of all steps entered so far, where limno_enter would leave up to two of them for later.
/// Collective: every rank calls it after the same limno_enter; waits until all have entered that step.
///
/// When it returns on rank 0 these rows are with the thread that writes them: if the disk takes them they are in
/// the series within milliseconds, and then survive the end of the process. They are not yet safe from a power cut:
/// for that, mark the step as checkpoint. Needed only by hosts that look at the series while they run, or that are
/// about to do something from which they may not come back.
///
/// # Safety
/// None beyond what the type says; any handle is answered.
#[unsafe(no_mangle)]
pub unsafe extern "C" fn limno_flush(run: *mut LimnoRun) -> Status {
    enter_run(run, |run| run.flush())
}

/// Completes all rows, writes them, and ends the run. Collective. The handle is then closed: using it again is
/// answered with LIMNO_CLOSED. A run left open is closed when MPI is finalised.
///
/// # Safety
/// None beyond what the type says; any handle is answered.
#[unsafe(no_mangle)]
pub unsafe extern "C" fn limno_close(run: *mut LimnoRun) -> Status {
    plain(|| registry::close(run))
}

/// The text of the last error of a run, of any thread; with NULL or a closed handle, the last error on this
/// thread, such as why limno_open failed. Never NULL; empty when there was none. Valid until this thread's next
/// call of limno_last_error.
///
/// # Safety
/// None beyond what the type says; any handle is answered.
#[unsafe(no_mangle)]
pub unsafe extern "C" fn limno_last_error(run: *const LimnoRun) -> *const c_char {
    super::boundary::last_error(run)
}

/// The name of a status, e.g. "LIMNO_BAD_CLOCK". Never NULL.
#[unsafe(no_mangle)]
pub extern "C" fn limno_status_name(status: i32) -> *const c_char {
    super::boundary::status_name(status).as_ptr()
}

/// How the run stands: rows, whether they are written, whether it sleeps. Not collective.
///
/// # Safety
/// Pointers must be valid or NULL.
#[unsafe(no_mangle)]
pub unsafe extern "C" fn limno_how_it_stands(
    run: *const LimnoRun,
    standing: *mut Standing,
) -> Status {
    super::boundary::any_run(run, |run| {
        let (asleep, rows, written, lost, seconds) = run.standing();
        let answer = Standing {
            size: 0,
            asleep: i32::from(asleep),
            reserved: 0,
            rows,
            rows_written: written,
            rows_lost: lost,
            seconds,
        };
        // SAFETY: the host's duty, stated above.
        unsafe { write_standing(standing, answer) }
    })
}

/// An array whose components, if it has several, stand next to each other.
fn packed(components: u32, data: *const c_void, stride: isize, scalar: i32) -> Array {
    Array {
        size: size_of::<Array>(),
        scalar,
        components,
        data,
        arrays: std::ptr::null(),
        stride,
        component_stride: 0,
    }
}

/// Which scalar type a number of the enumeration names.
pub(super) fn scalar_of(number: i32) -> Result<crate::lend::Scalar, Fault> {
    use crate::lend::Scalar as Inner;
    [
        (Scalar::F32, Inner::F32),
        (Scalar::F64, Inner::F64),
        (Scalar::I32, Inner::I32),
        (Scalar::U32, Inner::U32),
        (Scalar::I64, Inner::I64),
        (Scalar::U64, Inner::U64),
    ]
    .into_iter()
    .find(|(scalar, _)| *scalar as i32 == number)
    .map(|(_, inner)| inner)
    .ok_or_else(|| {
        Fault::new(
            Status::BadArgument,
            format!("{number} is no scalar type; expected LIMNO_F32 … LIMNO_U64 (1 to 6)"),
        )
    })
}

/// A checked description of an array, before its count is known.
#[derive(Clone, Copy, Debug)]
pub(super) struct Description<'a> {
    pub shape: ArrayShape,
    pub data: usize,
    /// Addresses of the components' arrays, where they are apart.
    pub arrays: Option<&'a [usize]>,
}

impl<'a> Description<'a> {
    pub fn is_separate(&self) -> bool {
        self.arrays.is_some()
    }

    pub fn lent(&self) -> Lent<'a> {
        match self.arrays {
            Some(addresses) => Lent::Arrays(addresses),
            None => Lent::Interleaved(self.data),
        }
    }
}
