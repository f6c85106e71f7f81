//! From pointers of the host to checked values. Every function here follows host pointers, after checking what
//! can be checked: null, alignment, size.

use super::functions::{Description, LIMNO_VERSION, scalar_of};
use super::types::{Array, Clock, LimnoRun, Options, Standing, Tally};
use crate::gauges::TallyBatch;
use crate::lend::ArrayShape;
use crate::run::{self, ConfigSource, Fault, Refusal, Request, Status};
use std::ffi::{CStr, c_char, c_void};

/// Longest text of a host that is read.
const LONGEST_TEXT: usize = 1 << 20;
/// Most components a field can have.
const MOST_COMPONENTS: u32 = 4096;
/// What stands for a list of pointers that is not read.
static NO_ADDRESSES: [usize; MOST_COMPONENTS as usize] = [0; MOST_COMPONENTS as usize];
/// Most events in a batch.
const MOST_EVENTS: usize = 1 << 40;
/// What is wrong where a handle has no place to go.
pub(super) const NO_PLACE: &str = "`run` is null or misaligned; give the address of a limno_run *";

fn bad<T>(text: String) -> Result<T, Fault> {
    Fault::err(Status::BadArgument, text)
}

/// Reads a text that must be there.
///
/// # Safety
/// `pointer` is null or leads to a text with an end, which stays for `'a`: as long as the call of the host.
pub(super) unsafe fn needed_text<'a>(name: &str, pointer: *const c_char) -> Result<&'a str, Fault> {
    // SAFETY: passed on.
    match unsafe { text(name, pointer) }? {
        Some(text) => Ok(text),
        None => bad(format!("`{name}` is null; give a name")),
    }
}

/// Reads a text; none where the pointer is null.
///
/// # Safety
/// As [`needed_text`].
pub(super) unsafe fn text<'a>(
    name: &str,
    pointer: *const c_char,
) -> Result<Option<&'a str>, Fault> {
    if pointer.is_null() {
        return Ok(None);
    }
    // SAFETY: not null; that it has an end is the caller's duty.
    let bytes = unsafe { CStr::from_ptr(pointer) }.to_bytes();
    if bytes.len() > LONGEST_TEXT {
        return bad(format!(
            "`{name}` is longer than a megabyte; is its end missing?"
        ));
    }
    match std::str::from_utf8(bytes) {
        Ok(text) => Ok(Some(text)),
        Err(_) => bad(format!("`{name}` is not UTF-8 text")),
    }
}

/// Copies a struct that begins with its size: a host's shorter one is filled up with zeros, a longer one of a
/// newer header is refused only if what is unknown to us is not zero.
///
/// # Safety
/// `pointer` is null or leads to as many bytes as its first member says. `T` is plain data for which zero is
/// valid.
unsafe fn sized<T: Copy>(
    name: &str,
    initial: &str,
    least: usize,
    pointer: *const T,
) -> Result<T, Fault> {
    if pointer.is_null() {
        return bad(format!("`{name}` is null"));
    }
    if !pointer.is_aligned() {
        return bad(format!(
            "`{name}` at {pointer:?} is misaligned; give the address of a {initial}"
        ));
    }
    // SAFETY: not null and aligned; every such struct begins with a size_t.
    let size = unsafe { pointer.cast::<usize>().read() };
    if size < least || size > 4096 {
        return bad(format!(
            "`{name}` says its size is {size}, expected {}; set its first member to sizeof({initial}) or start from its \
             _INIT macro",
            size_of::<T>()
        ));
    }
    let mut value = std::mem::MaybeUninit::<T>::zeroed();
    // SAFETY: the struct is at least as long as its size says, by the caller's duty; the copy stays within both.
    unsafe {
        std::ptr::copy_nonoverlapping(
            pointer.cast::<u8>(),
            value.as_mut_ptr().cast::<u8>(),
            size.min(size_of::<T>()),
        );
    }
    for offset in size_of::<T>()..size {
        // SAFETY: within the size that the struct states.
        if unsafe { pointer.cast::<u8>().add(offset).read() } != 0 {
            return bad(format!(
                "`{name}` says more than this library understands (its byte {offset} is set); link the library that \
                 belongs to the header"
            ));
        }
    }
    // SAFETY: plain data, every byte of which is initialised.
    Ok(unsafe { value.assume_init() })
}

/// Reads what a host says when it opens a run. What is wrong with it becomes part of the request, since the
/// other ranks must hear of it.
///
/// # Safety
/// Every pointer is null or valid.
pub(super) unsafe fn options_of(
    version: u32,
    config: *const c_char,
    series: *const c_char,
    options: *const Options,
    run: *mut *mut LimnoRun,
) -> Request {
    let mut request = Request {
        config: ConfigSource {
            path: String::new(),
            text: None,
        },
        series: String::new(),
        host_name: String::new(),
        host_version: String::new(),
        description: String::new(),
        threads: 0,
        fault: None,
        is_complete: false,
    };
    // SAFETY: passed on.
    let filled = unsafe { fill(&mut request, version, config, series, options) };
    // Found before anything is opened, so that the other ranks do not open what this one cannot hold.
    let placed = if run.is_null() || !run.is_aligned() {
        bad(NO_PLACE.to_string())
    } else {
        Ok(())
    };
    request.fault = filled.and(placed).err();
    request
}

/// # Safety
/// As [`options_of`].
unsafe fn fill(
    request: &mut Request,
    version: u32,
    config: *const c_char,
    series: *const c_char,
    options: *const Options,
) -> Result<(), Fault> {
    // Before 1.0 every minor version may change the interface.
    if version / 100 != LIMNO_VERSION / 100 {
        return Fault::err(
            Status::BadVersion,
            format!(
                "the host was built with the header of version {}, this library is {}; rebuild the host with the header \
                 that belongs to the library, and pass LIMNO_VERSION",
                version_text(version),
                version_text(LIMNO_VERSION)
            ),
        );
    }
    if !options.is_null() {
        // SAFETY: passed on.
        let options = unsafe { sized("options", "limno_options", size_of::<usize>(), options) }?;
        // SAFETY: passed on, for each text.
        unsafe {
            request.host_name = owned(text("host_name", options.host_name)?);
            request.host_version = owned(text("host_version", options.host_version)?);
            request.description = owned(text("description", options.description)?);
            request.config.text = text("config_text", options.config_text)?.map(str::to_string);
        }
        request.threads = match usize::try_from(options.threads) {
            Ok(threads) if threads <= 1024 => threads,
            _ => {
                return bad(format!(
                    "`threads` is {}; expected 0 (as the config says) to 1024",
                    options.threads
                ));
            }
        };
    }
    // SAFETY: passed on.
    let (config, series) = unsafe { (text("config", config)?, text("series", series)?) };
    request.is_complete = (config.is_some() || request.config.text.is_some()) && series.is_some();
    request.config.path = config.unwrap_or("limnograph.toml").to_string();
    request.series = owned(series);
    Ok(())
}

fn owned(text: Option<&str>) -> String {
    text.unwrap_or_default().to_string()
}

fn version_text(version: u32) -> String {
    format!(
        "{}.{}.{}",
        version / 10000,
        version / 100 % 100,
        version % 100
    )
}

/// # Safety
/// `clock` is null or valid.
pub(super) unsafe fn checked_clock(clock: *const Clock) -> Result<run::Clock, Refusal> {
    // SAFETY: passed on.
    let clock = unsafe { sized("clock", "limno_clock", 24, clock) }?;
    let flag = |name: &str, value: i32| match value {
        0 | 1 => Ok(value == 1),
        _ => Fault::err(
            Status::BadClock,
            format!(
                "clock of step {}: `{name}` is {value}; expected 0 or 1",
                clock.step
            ),
        ),
    };
    match (
        flag("synchronised", clock.synchronised),
        flag("checkpoint", clock.checkpoint),
    ) {
        (Ok(synchronised), Ok(checkpoint)) => Ok(run::Clock {
            step: clock.step,
            // Makes a negative zero a plain one, so that ranks cannot differ by it.
            time: clock.time + 0.0,
            step_length: clock.step_length,
            synchronised,
            checkpoint,
        }),
        (synchronised, checkpoint) => Err(Refusal {
            step: Some(clock.step),
            synchronised: synchronised.as_ref().ok().copied(),
            checkpoint: checkpoint.as_ref().ok().copied(),
            fault: match (synchronised, checkpoint) {
                (Err(fault), _) | (_, Err(fault)) => fault,
                _ => Fault::new(Status::BadClock, "a flag of the clock is neither 0 nor 1"),
            },
        }),
    }
}

/// How a list of one pointer per component is treated.
#[derive(Clone, Copy, Debug, PartialEq, Eq)]
pub(super) enum List {
    /// Read, unless a field of so many components makes its length doubtful.
    Read(Option<usize>),
    /// Left alone.
    Ignored,
}

/// # Safety
/// `array` is null or valid, and so is its list of arrays where it is read.
pub(super) unsafe fn checked_array<'a>(
    array: *const Array,
    list: List,
) -> Result<Description<'a>, Fault> {
    // SAFETY: passed on.
    let array = unsafe { sized("array", "limno_array", size_of::<Array>(), array) }?;
    let scalar = scalar_of(array.scalar)?;
    if array.components == 0 || array.components > MOST_COMPONENTS {
        return bad(format!(
            "{} components; expected 1, 3, or as many as the config names elements",
            array.components
        ));
    }
    let components = array.components as usize;
    let component_stride = if array.component_stride == 0 {
        scalar.bytes() as isize
    } else {
        array.component_stride
    };
    let arrays = match list {
        _ if array.arrays.is_null() => None,
        List::Ignored => Some(&[][..]),
        // The list may be as short as the field has components: it is refused without being read.
        List::Read(Some(expected)) if expected != components => Some(&NO_ADDRESSES[..components]),
        // SAFETY: not null; that it holds one pointer per component is the caller's duty.
        List::Read(_) => Some(unsafe { listed(array.arrays, components) }?),
    };
    let shape = ArrayShape {
        scalar,
        components,
        stride: array.stride,
        component_stride,
    };
    Ok(Description {
        shape,
        data: array.data as usize,
        arrays,
    })
}

/// Views a list of pointers as addresses.
///
/// # Safety
/// `list` leads to so many pointers, aligned or not, that stay for `'a`: as long as the call of the host.
pub(super) unsafe fn listed<'a>(
    list: *const *const c_void,
    components: usize,
) -> Result<&'a [usize], Fault> {
    if !list.is_aligned() {
        return bad("`arrays` is misaligned; give the address of an array of pointers".to_string());
    }
    // SAFETY: aligned, and a pointer has the size of an address; the rest is the caller's duty.
    Ok(unsafe { std::slice::from_raw_parts(list.cast::<usize>(), components) })
}

/// # Safety
/// `batch` is null or valid, with as many numbers behind each pointer as the header says.
pub(super) unsafe fn checked_tally<'a>(
    batch: *const Tally,
    elements: usize,
) -> Result<(&'a str, TallyBatch<'a>), Fault> {
    // SAFETY: passed on.
    let batch = unsafe { sized("batch", "limno_tally_batch", 24, batch) }?;
    // SAFETY: passed on.
    let channel = unsafe { text("channel", batch.channel) }?;
    let Some(channel) = channel else {
        return bad("`channel` is null; name a channel, such as \"wind\"".to_string());
    };
    if batch.count > MOST_EVENTS {
        return bad(format!(
            "tally on channel {channel}: {} events are more than any process has; is the count a negative number?",
            batch.count
        ));
    }
    let named =
        |name: &str, pointer: *const f64, each: usize| -> Result<Option<&'a [f64]>, Fault> {
            if pointer.is_null() || batch.count == 0 {
                return Ok(None);
            }
            if !pointer.is_aligned() {
                return bad(format!(
                    "tally on channel {channel}: `{name}` at {pointer:?} is misaligned for doubles"
                ));
            }
            // SAFETY: not null, aligned, and of a length that fits, as the count is bounded above and `each` is small;
            // that the numbers are there is the caller's duty.
            Ok(Some(unsafe {
                std::slice::from_raw_parts(pointer, batch.count * each)
            }))
        };
    if !batch.elements.is_null() && elements == 0 {
        return bad(format!(
            "tally on channel {channel}: `elements` is given, but the config names none under [elements]"
        ));
    }
    if !batch.elements.is_null() && ![0, elements].contains(&batch.elements_each) {
        return bad(format!(
            "tally on channel {channel}: an event has {} numbers in `elements`, but the config names {elements} elements; \
             `elements_each` must be {elements}, or 0 to take that for granted",
            batch.elements_each
        ));
    }
    let checked = TallyBatch {
        count: batch.count,
        mass: named("mass", batch.mass, 1)?,
        momentum: named("momentum", batch.momentum, 1)?,
        energy: named("energy", batch.energy, 1)?,
        metals: named("metals", batch.metals, 1)?,
        elements: named("elements", batch.elements, elements)?,
        position: named("position", batch.position, 3)?,
    };
    Ok((channel, checked))
}

/// Is there a place for an answer?
pub(super) fn place_for(name: &str, place: *mut i32) -> Result<(), Fault> {
    if place.is_null() || !place.is_aligned() {
        return bad(format!(
            "`{name}` is null or misaligned; give the address of an int32_t"
        ));
    }
    Ok(())
}

/// Writes an answer where the host wants it.
///
/// # Safety
/// `place` is null or valid.
pub(super) unsafe fn write_out(name: &str, place: *mut i32, value: i32) -> Result<(), Fault> {
    place_for(name, place)?;
    // SAFETY: not null and aligned; that it is valid is the caller's duty.
    unsafe { place.write(value) };
    Ok(())
}

/// Writes as much of an answer as the host's struct holds.
///
/// # Safety
/// `place` is null or leads to as many bytes as its first member says.
pub(super) unsafe fn write_standing(
    place: *mut Standing,
    mut answer: Standing,
) -> Result<(), Fault> {
    // SAFETY: passed on.
    let given = unsafe {
        sized(
            "standing",
            "limno_standing",
            size_of::<usize>(),
            place.cast_const(),
        )
    }?;
    answer.size = given.size;
    let bytes = given.size.min(size_of::<Standing>());
    // SAFETY: `sized` has checked the place; the copy stays within the size that it states.
    unsafe {
        std::ptr::copy_nonoverlapping((&raw const answer).cast::<u8>(), place.cast::<u8>(), bytes)
    };
    Ok(())
}
