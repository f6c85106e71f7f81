//! Default floating-point control while we compute, and the host's own restored to the bit afterwards.
//!
//! A host built with `-Ofast` flushes subnormals to zero; one that traps would be killed by a division we
//! mean to be infinite. Both, and the sticky flags, must be exactly as they were when we return.

/// Holds the host's control and flags; gives them back when dropped.
pub struct FloatGuard {
    #[cfg(target_arch = "x86_64")]
    mxcsr: u32,
    #[cfg(target_arch = "x86_64")]
    x87: [u32; 7],
    #[cfg(target_arch = "aarch64")]
    control: u64,
    #[cfg(target_arch = "aarch64")]
    status: u64,
}

#[cfg(target_arch = "x86_64")]
impl FloatGuard {
    /// Saves the present environment and sets the default one: round to nearest, all exceptions masked,
    /// no flushing to zero, flags clear, extended precision in the old unit.
    #[inline]
    pub fn enter() -> FloatGuard {
        let mut guard = FloatGuard {
            mxcsr: 0,
            x87: [0; 7],
        };
        let default_mxcsr: u32 = 0x1F80;
        // SAFETY: the instructions store to and load from memory owned by `guard` and this frame, and
        // change nothing but the floating-point environment, which `drop` restores. `fninit` empties the
        // x87 register stack, which the calling convention requires to be empty at a call.
        unsafe {
            std::arch::asm!(
                "stmxcsr [{saved}]",
                "ldmxcsr [{default}]",
                "fnstenv [{x87}]",
                "fninit",
                saved = in(reg) &raw mut guard.mxcsr,
                default = in(reg) &raw const default_mxcsr,
                x87 = in(reg) guard.x87.as_mut_ptr(),
                out("st(0)") _, out("st(1)") _, out("st(2)") _, out("st(3)") _,
                out("st(4)") _, out("st(5)") _, out("st(6)") _, out("st(7)") _,
                options(nostack),
            );
        }
        guard
    }
}

#[cfg(target_arch = "x86_64")]
impl Drop for FloatGuard {
    #[inline]
    fn drop(&mut self) {
        // SAFETY: restores what `enter` saved, from memory owned by `self`.
        unsafe {
            std::arch::asm!(
                "fldenv [{x87}]",
                "ldmxcsr [{saved}]",
                saved = in(reg) &raw const self.mxcsr,
                x87 = in(reg) self.x87.as_ptr(),
                out("st(0)") _, out("st(1)") _, out("st(2)") _, out("st(3)") _,
                out("st(4)") _, out("st(5)") _, out("st(6)") _, out("st(7)") _,
                options(nostack),
            );
        }
    }
}

#[cfg(target_arch = "aarch64")]
impl FloatGuard {
    /// Saves the present environment and sets the default one.
    #[inline]
    pub fn enter() -> FloatGuard {
        let (control, status): (u64, u64);
        // SAFETY: reads and writes this thread's floating-point control and status registers only; `drop`
        // restores both.
        unsafe {
            std::arch::asm!(
                "mrs {control}, fpcr",
                "mrs {status}, fpsr",
                "msr fpcr, xzr",
                "msr fpsr, xzr",
                control = out(reg) control,
                status = out(reg) status,
                options(nomem, nostack),
            );
        }
        FloatGuard { control, status }
    }
}

#[cfg(target_arch = "aarch64")]
impl Drop for FloatGuard {
    #[inline]
    fn drop(&mut self) {
        // SAFETY: restores what `enter` saved.
        unsafe {
            std::arch::asm!(
                "msr fpcr, {control}",
                "msr fpsr, {status}",
                control = in(reg) self.control,
                status = in(reg) self.status,
                options(nomem, nostack),
            );
        }
    }
}

#[cfg(not(any(target_arch = "x86_64", target_arch = "aarch64")))]
compile_error!("limnograph knows the floating-point control of x86-64 and aarch64 only");
