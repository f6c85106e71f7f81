//! The structs that hosts fill. Each begins with its size, so that it can grow without breaking a host.

use std::ffi::{c_char, c_void};

/// One opened instance. A handle is only a ticket: it is never followed as a pointer, so a null, closed or
/// made-up one is answered with LIMNO_CLOSED.
pub struct LimnoRun {
    _private: [u8; 0],
}

/// The type of the numbers of a lent array.
#[repr(i32)]
#[derive(Clone, Copy, Debug, PartialEq, Eq)]
pub enum Scalar {
    /// float
    F32 = 1,
    /// double
    F64 = 2,
    /// int32_t
    I32 = 3,
    /// uint32_t
    U32 = 4,
    /// int64_t
    I64 = 5,
    /// uint64_t
    U64 = 6,
}

/// What the host says about a step. Start from LIMNO_CLOCK_INIT, or zero it and set `size`.
#[repr(C)]
#[derive(Clone, Copy)]
pub struct Clock {
    /// sizeof(limno_clock).
    pub size: usize,
    /// The host's step number. Must grow from one mark to the next; numbers may be left out.
    pub step: u64,
    /// The moment that the lent arrays describe, in the coordinate that the config states under [time]:
    /// t in the host's time unit, the scale factor a, or ln a. Must not go back within a run, and must be the
    /// same to the bit on every rank: broadcast it where ranks compute it each for itself.
    pub time: f64,
    /// Length of the step that ends at `time`, in the same coordinate and unit; 0 if not known.
    pub step_length: f64,
    /// 1 when all particles are at `time` (a host with individual time steps: only at synchronisation
    /// points), else 0.
    pub synchronised: i32,
    /// 1 when the host is about to write a checkpoint: the step is measured whatever the cadence says, and
    /// its row is on disk when limno_enter returns on rank 0, or the status says that it is not.
    pub checkpoint: i32,
}

/// How a field lies in the host's memory, for whatever limno_lend and its two sisters do not cover.
///
/// The number of component c of element i stands at
///     (char *) data + i * stride + c * component_stride,       or, when `arrays` is not NULL, at
///     (char *) arrays[c] + i * stride.
#[repr(C)]
#[derive(Clone, Copy)]
pub struct Array {
    /// sizeof(limno_array).
    pub size: usize,
    /// Type of the numbers: a limno_scalar.
    pub scalar: i32,
    /// Numbers an element has: 1; 3 for position and velocity; the number of elements named in the config
    /// for element_fraction.
    pub components: u32,
    /// First number. Ignored when `arrays` is given; may be NULL in limno_describe and when count is 0.
    pub data: *const c_void,
    /// One pointer per component, or NULL.
    pub arrays: *const *const c_void,
    /// Bytes from an element to the next: sizeof the struct, or of a packed element. May be negative. 0 means
    /// one value (one for each component) shared by all elements.
    pub stride: isize,
    /// Bytes from a component to the next; 0: packed. Not used with `arrays`.
    pub component_stride: isize,
}

/// A batch of events that no array shows: winds launched, mass returned by stars, energy injected.
/// Every pointer that is not NULL leads to `count` entries (`elements`: count × number of elements named in
/// the config, event after event; `position`: count × 3). NULL means zero, or not known.
#[repr(C)]
#[derive(Clone, Copy)]
pub struct Tally {
    /// sizeof(limno_tally_batch).
    pub size: usize,
    /// "wind", "stellar_return", "black_hole", or a name listed in the config under [channels].
    pub channel: *const c_char,
    /// Number of events in the batch.
    pub count: usize,
    /// Mass of each event, in the host's mass unit. Amounts may be negative.
    pub mass: *const f64,
    /// Magnitude of its momentum, in the host's momentum unit (unless the config says otherwise: mass unit
    /// times velocity unit, in the form in which velocities are kept).
    pub momentum: *const f64,
    /// Its energy, in the host's energy unit (unless the config says otherwise: mass unit times velocity
    /// unit squared, physical).
    pub energy: *const f64,
    /// Mass in metals, in the host's mass unit.
    pub metals: *const f64,
    /// Mass in each element, in the host's mass unit.
    pub elements: *const f64,
    /// Where it happened, as positions are lent. Checked and reserved: no gauge uses places yet.
    pub position: *const f64,
    /// The particle it happened to. Reserved: no gauge uses it yet.
    pub particle_id: *const u64,
    /// How many numbers an event has in `elements`; 0: as many as the config names elements. Any other number
    /// than that is an error, so that a host that counts otherwise is told before its arrays are read.
    pub elements_each: usize,
}

/// What a host may say when it opens a run. NULL in its place, or a zero in a member, means the default.
#[repr(C)]
#[derive(Clone, Copy)]
pub struct Options {
    /// sizeof(limno_options).
    pub size: usize,
    /// Name of the code, kept with the series, e.g. "saltmarsh".
    pub host_name: *const c_char,
    /// Its version, kept with the series.
    pub host_version: *const c_char,
    /// Anything that tells this run from others, kept with the series.
    pub description: *const c_char,
    /// Text of the config itself; `config` then only serves as a name in messages.
    pub config_text: *const c_char,
    /// Threads that measure; 0: as the config says (1 by default: the calling thread, and no other).
    pub threads: i32,
    /// Reserved, 0.
    pub reserved: i32,
}

/// How a run stands; fill `size` before the call.
#[repr(C)]
#[derive(Clone, Copy)]
pub struct Standing {
    /// sizeof(limno_standing).
    pub size: usize,
    /// 1 when the run sleeps after a fault.
    pub asleep: i32,
    /// Reserved.
    pub reserved: i32,
    /// Rows that have been entered; each rank counts the rows whose reduction it has seen complete.
    pub rows: u64,
    /// Of these, rows known to be written (rank 0 only; elsewhere 0).
    pub rows_written: u64,
    /// Rows that were lost because the disk would not take them in time (rank 0 only).
    pub rows_lost: u64,
    /// Seconds this rank has spent in the library since the run was opened.
    pub seconds: f64,
}
