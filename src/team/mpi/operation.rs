//! The one operation, as MPI calls it.

use crate::team::cells;
use mpi::ffi;
use std::ffi::{c_int, c_void};
use std::panic::{AssertUnwindSafe, catch_unwind};

/// Combines `count` whole buffers of `other` into those of `into`.
///
/// Runs inside MPI, under whatever floating-point control holds there: integers only.
pub(super) unsafe extern "C" fn reduce(
    other: *mut c_void,
    into: *mut c_void,
    count: *mut c_int,
    datatype: *mut ffi::MPI_Datatype,
) {
    // A panic has nowhere to go from here; cells that were not combined keep the rank's own head, and
    // nothing in `combine` panics.
    let _ = catch_unwind(AssertUnwindSafe(|| {
        let mut bytes: c_int = 0;
        // SAFETY: MPI passes the address of the data type it was given, and asking for its size is local.
        let (code, count) = unsafe { (ffi::MPI_Type_size(*datatype, &raw mut bytes), *count) };
        let sized = code == ffi::MPI_SUCCESS as c_int && bytes > 0;
        let (Ok(count), true) = (usize::try_from(count), sized) else {
            return;
        };
        let cells = bytes as usize / size_of::<u64>();
        for index in 0..count {
            let offset = index * cells;
            // SAFETY: MPI promises `count` elements of `cells` contiguous cells behind both pointers.
            unsafe {
                combine_at(
                    other.cast::<u64>().add(offset),
                    into.cast::<u64>().add(offset),
                    cells,
                )
            };
        }
    }));
}

/// Combines the buffer at `other` into the one at `into`.
///
/// # Safety
/// Both point to `cells` cells, aligned or not, which do not overlap; those of `into` are writable.
unsafe fn combine_at(other: *const u64, into: *mut u64, cells: usize) {
    if other.is_aligned() && into.is_aligned() {
        // SAFETY: promised by the caller, and aligned.
        let (other, into) = unsafe {
            (
                std::slice::from_raw_parts(other, cells),
                std::slice::from_raw_parts_mut(into, cells),
            )
        };
        return cells::combine(other, into);
    }
    // MPI libraries align their own buffers in practice; the standard does not say so.
    let mut copies = (vec![0u64; cells], vec![0u64; cells]);
    let bytes = cells * size_of::<u64>();
    // SAFETY: byte copies of memory promised by the caller, from and to vectors of the same length.
    unsafe {
        std::ptr::copy_nonoverlapping(
            other.cast::<u8>(),
            copies.0.as_mut_ptr().cast::<u8>(),
            bytes,
        );
        std::ptr::copy_nonoverlapping(into.cast::<u8>(), copies.1.as_mut_ptr().cast::<u8>(), bytes);
    }
    cells::combine(&copies.0, &mut copies.1);
    // SAFETY: as above.
    unsafe {
        std::ptr::copy_nonoverlapping(copies.1.as_ptr().cast::<u8>(), into.cast::<u8>(), bytes)
    };
}

#[cfg(test)]
mod tests {
    use super::*;
    use crate::team::cells::{Kind, Layout};

    #[test]
    fn buffers_that_are_not_aligned_combine_all_the_same() {
        let mut layout = Layout::default();
        let sum = layout.add(Kind::Sum, 1, 3);
        let mut cells = Vec::new();
        layout.clear(&mut cells);
        cells[layout.range(sum)].copy_from_slice(&[1, 2, 3]);
        let bytes: Vec<u8> = cells.iter().flat_map(|cell| cell.to_ne_bytes()).collect();
        for shift in 0..8 {
            let mut space = vec![0u64; cells.len() + 1];
            // SAFETY: the space is one cell longer than the buffer, so that any shift below 8 fits.
            unsafe {
                let into = space.as_mut_ptr().cast::<u8>().add(shift);
                std::ptr::copy_nonoverlapping(bytes.as_ptr(), into, bytes.len());
                combine_at(cells.as_ptr(), into.cast(), cells.len());
                let mut result = vec![0u64; cells.len()];
                std::ptr::copy_nonoverlapping(into, result.as_mut_ptr().cast::<u8>(), bytes.len());
                assert_eq!(result[layout.range(sum)], [2, 4, 6]);
                assert!(layout.agrees(&result));
            }
        }
    }
}
