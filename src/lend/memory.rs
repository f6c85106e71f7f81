//! The host's memory itself: the only place where lent numbers are read.
//!
//! Every function trusts its caller that the numbers lie within a view that [`super::View`] has checked, and the host
//! that it keeps them readable and unchanged, which is the duty that the header states.

/// Numbers that follow each other without a gap, as a slice; none where they do not.
pub(super) fn packed<'a, T: Copy>(
    base: usize,
    stride: isize,
    start: usize,
    length: usize,
) -> Option<&'a [T]> {
    let size = size_of::<T>();
    if stride != size as isize || length == 0 {
        return None;
    }
    let first = base.wrapping_add(start.wrapping_mul(size)) as *const T;
    // SAFETY: `View::new` checked that the elements lie in one aligned range of the address space that does not
    // wrap, the caller that this block is inside it; that the host keeps the memory readable and unchanged is the
    // duty the header states. The slice is used within the call that made it.
    Some(unsafe { std::slice::from_raw_parts(first, length) })
}

/// Reads the numbers of some elements, of `within` from `start` on.
pub(super) fn pick<T: Copy>(
    base: usize,
    stride: isize,
    start: usize,
    within: usize,
    elements: &[u32],
    into: &mut [f64],
    convert: impl Fn(T) -> f64,
) {
    let first = (base as *const T).wrapping_byte_offset(stride.wrapping_mul(start as isize));
    for (&element, to) in elements.iter().zip(into) {
        assert!((element as usize) < within);
        let at = first.wrapping_byte_offset(stride.wrapping_mul(element as isize));
        // SAFETY: as in `packed`, for this number, which has just been found to be one of the view's; stride and
        // base are multiples of its size, so it is aligned.
        *to = convert(unsafe { at.read() });
    }
}

/// Does something hold for each of `length` numbers from `start` on?
pub(super) fn every<T: Copy>(
    base: usize,
    stride: isize,
    start: usize,
    length: usize,
    holds: impl Fn(T) -> bool,
) -> bool {
    let mut at = (base as *const T).wrapping_byte_offset(stride.wrapping_mul(start as isize));
    let mut all = true;
    for _ in 0..length {
        // SAFETY: as in `packed`, for this number, which the caller has found to be one of the view's; stride and
        // base are multiples of its size, so it is aligned.
        all &= holds(unsafe { at.read() });
        at = at.wrapping_byte_offset(stride);
    }
    all
}

/// Reads numbers of type `T` at a stride and converts them; unit stride and constants have loops of their own.
pub(super) fn gather<T: Copy, U: Copy>(
    base: usize,
    stride: isize,
    start: usize,
    into: &mut [U],
    convert: impl Fn(T) -> U,
) {
    if into.is_empty() {
        return;
    }
    let first = (base as *const T).wrapping_byte_offset(stride.wrapping_mul(start as isize));
    if let Some(numbers) = packed::<T>(base, stride, start, into.len()) {
        for (to, from) in into.iter_mut().zip(numbers) {
            *to = convert(*from);
        }
    } else if stride == 0 {
        // SAFETY: as in `packed`, for one number.
        into.fill(convert(unsafe { first.read() }));
    } else {
        let mut at = first;
        for to in into {
            // SAFETY: as in `packed`, for this number; stride and base are multiples of its size, so it is aligned.
            *to = convert(unsafe { at.read() });
            at = at.wrapping_byte_offset(stride);
        }
    }
}
