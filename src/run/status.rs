//! What a call answers: a status with a fixed number, and a text that says what to do.

use std::fmt;

/// What every call answers. The numbers never change; new ones may be added.
#[repr(i32)]
#[derive(Clone, Copy, Debug, PartialEq, Eq)]
pub enum Status {
    /// Done.
    Ok = 0,
    /// An argument cannot be right: a null pointer, a count that disagrees, a misaligned or absurd stride,
    /// a number that is not finite. The run goes on; what the argument was for did not happen.
    BadArgument = 1,
    /// The call does not fit here: `lend` before `mark`, `enter` without `mark`. The run goes on.
    BadOrder = 2,
    /// The clock cannot be right: time not finite, outside its range, or going backwards. The run goes on.
    BadClock = 3,
    /// A species, field or channel of that name does not exist. The run goes on.
    UnknownName = 4,
    /// The config cannot be read or says something impossible. Nothing was opened.
    BadConfig = 5,
    /// Header and library are of different versions. Nothing was opened.
    BadVersion = 6,
    /// The MPI library is not the one this library was built with, or MPI is not initialised, or this
    /// library was built without MPI. Nothing was opened.
    BadMpi = 7,
    /// The series cannot be opened or written. Of `limno_open…`: nothing was opened. Later: rows wait in
    /// memory and writing is tried again.
    Disk = 8,
    /// A checkpoint's row was taken but is not known to be safe on disk. Told by rank 0.
    NotDurable = 9,
    /// Some numbers were not finite and were left out; everything else was measured.
    LeftOut = 10,
    /// The run sleeps after a fault; the text says why. Every call returns at once and does nothing.
    Asleep = 11,
    /// The run was closed, or the handle was never one. Nothing happened.
    Closed = 12,
    /// The system refused memory or a thread.
    NoMemory = 13,
    /// A fault inside the library. The run sleeps.
    Internal = 14,
}

/// A status other than Ok, with the text for the host.
#[derive(Clone, Debug, PartialEq, Eq)]
pub struct Fault {
    /// What kind of thing is wrong.
    pub status: Status,
    /// What was wrong, where, what was expected, what to do.
    pub text: String,
}

impl Fault {
    /// A fault with its text.
    pub fn new(status: Status, text: impl Into<String>) -> Fault {
        Fault {
            status,
            text: text.into(),
        }
    }

    /// `Err` of a fault.
    pub fn err<T>(status: Status, text: impl Into<String>) -> Result<T, Fault> {
        Err(Fault::new(status, text))
    }
}

impl fmt::Display for Fault {
    fn fmt(&self, f: &mut fmt::Formatter<'_>) -> fmt::Result {
        f.write_str(&self.text)
    }
}

impl Status {
    /// The status with that number.
    pub fn from_number(number: i32) -> Option<Status> {
        use Status::*;
        [
            Ok,
            BadArgument,
            BadOrder,
            BadClock,
            UnknownName,
            BadConfig,
            BadVersion,
            BadMpi,
            Disk,
            NotDurable,
            LeftOut,
            Asleep,
            Closed,
            NoMemory,
            Internal,
        ]
        .into_iter()
        .find(|status| *status as i32 == number)
    }
}
