//! Asking for memory before it is needed.

/// Asks for the cache line in which a value lies, without waiting for it.
#[inline(always)]
pub fn fetch<T>(value: &T) {
    fetch_address(std::ptr::from_ref(value) as usize);
}

/// Asks for the cache line of an address; harmless whatever the address is.
#[inline(always)]
pub fn fetch_address(address: usize) {
    #[cfg(target_arch = "x86_64")]
    // SAFETY: a prefetch reads nothing that a program could see and never faults.
    unsafe {
        use std::arch::x86_64::{_MM_HINT_T0, _mm_prefetch};
        _mm_prefetch::<_MM_HINT_T0>(address as *const i8);
    }
    #[cfg(not(target_arch = "x86_64"))]
    let _ = address;
}
