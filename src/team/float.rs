//! Default floating-point control while we compute, and the host's own restored to the bit afterwards.
//!
//! A host built with `-Ofast` flushes subnormals to zero; one that traps would be killed by a division we
//! mean to be infinite. Both, and the sticky flags, must be exactly as they were when we return.

use std::marker::PhantomData;

/// Runs `work` under default floating-point control.
///
/// The compiler may move arithmetic across a change of control, of which it knows nothing, but not out of a
/// function that it does not inline: so `work` is called through one.
pub fn under_default_control<T>(work: impl FnOnce() -> T) -> T {
    let _control = FloatGuard::enter();
    out_of_line(work)
}

#[inline(never)]
fn out_of_line<T>(work: impl FnOnce() -> T) -> T {
    work()
}

/// Holds the host's control and flags; gives them back when dropped. Prefer [`under_default_control`].
pub struct FloatGuard {
    /// Control belongs to a thread, and so does what is held here.
    stays: PhantomData<*const ()>,
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
            stays: PhantomData,
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
        FloatGuard {
            stays: PhantomData,
            control,
            status,
        }
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

#[cfg(test)]
mod tests {
    use super::*;
    use std::hint::black_box;

    /// Control and flags of this thread, all that the guard must give back.
    #[cfg(target_arch = "x86_64")]
    fn environment() -> (u32, [u32; 3]) {
        let mut mxcsr = 0u32;
        let mut x87 = [0u32; 7];
        // SAFETY: stores into this frame; `fldenv` undoes the masking that `fnstenv` does.
        unsafe {
            std::arch::asm!("stmxcsr [{}]", "fnstenv [{}]", "fldenv [{}]",
                in(reg) &raw mut mxcsr, in(reg) x87.as_mut_ptr(), in(reg) x87.as_ptr(), options(nostack));
        }
        // Control, status and tag words; the rest is where the last instruction stood.
        (mxcsr, [x87[0] & 0xffff, x87[1] & 0xffff, x87[2] & 0xffff])
    }

    #[cfg(target_arch = "x86_64")]
    fn set(environment: (u32, [u32; 3])) {
        let x87 = [
            environment.1[0],
            environment.1[1],
            environment.1[2],
            0,
            0,
            0,
            0,
        ];
        // SAFETY: loads control of this thread from this frame; each test restores it.
        unsafe {
            std::arch::asm!("ldmxcsr [{}]", "fldenv [{}]",
                in(reg) &raw const environment.0, in(reg) x87.as_ptr(), options(nostack));
        }
    }

    /// Hosts that flush subnormals, round otherwise, trap, or have flags standing.
    #[cfg(target_arch = "x86_64")]
    fn hosts() -> Vec<(u32, [u32; 3])> {
        let plain = environment();
        let with = |mxcsr: u32, control: u32, status: u32| (mxcsr, [control, status, 0xffff]);
        vec![
            plain,
            with(0x1F80 | 0x8040, plain.1[0], 0), // -Ofast: flush to zero, subnormals are zero
            with(0x1F80 | 0x6000, 0x0F7F, 0),     // rounds towards zero
            with(0x1F80 | 0x003F, 0x037F, 0x003F), // all flags stand
            with(0x1F80 & !0x0680, 0x0372, 0),    // traps invalid, division by zero and overflow
        ]
    }

    #[cfg(target_arch = "aarch64")]
    fn environment() -> (u64, u64) {
        let (control, status): (u64, u64);
        // SAFETY: reads two registers of this thread.
        unsafe {
            std::arch::asm!("mrs {}, fpcr", "mrs {}, fpsr", out(reg) control, out(reg) status,
                options(nomem, nostack));
        }
        (control, status)
    }

    #[cfg(target_arch = "aarch64")]
    fn set((control, status): (u64, u64)) {
        // SAFETY: writes two registers of this thread; each test restores them.
        unsafe {
            std::arch::asm!("msr fpcr, {}", "msr fpsr, {}", in(reg) control, in(reg) status,
                options(nomem, nostack));
        }
    }

    /// Hosts that flush subnormals, round otherwise, trap (where the processor can), or have flags standing.
    #[cfg(target_arch = "aarch64")]
    fn hosts() -> Vec<(u64, u64)> {
        vec![
            environment(),
            (1 << 24, 0),
            (3 << 22, 0),
            (0, 0x1f),
            (0x700, 0),
        ]
    }

    /// Runs a check as each kind of host; its answer is looked at under this thread's own control again.
    fn as_each_host<T>(check: impl Fn() -> T) -> Vec<T> {
        let own = environment();
        let answers = hosts()
            .into_iter()
            .map(|host| {
                set(host);
                let answer = out_of_line(&check);
                set(own);
                answer
            })
            .collect();
        assert_eq!(environment(), own);
        answers
    }

    #[test]
    fn the_hosts_control_and_flags_come_back_exactly() {
        for (before, after) in as_each_host(|| {
            let before = environment();
            under_default_control(|| {
                black_box(black_box(1.0) / black_box(0.0));
                black_box(black_box(1e300) * black_box(1e300));
                black_box(black_box(-1.0f64).sqrt());
            });
            (before, environment())
        }) {
            assert_eq!(before, after);
        }
    }

    #[test]
    fn every_host_gets_the_same_arithmetic_and_no_signal() {
        let own = || {
            let tiny = black_box(f64::MIN_POSITIVE) / black_box(8.0);
            let third = black_box(1.0) / black_box(3.0);
            let endless = black_box(1.0) / black_box(0.0);
            let none = black_box(0.0) * endless;
            [tiny * black_box(8.0), third, endless, none.abs()].map(f64::to_bits)
        };
        let expected = own();
        assert_eq!(f64::from_bits(expected[0]), f64::MIN_POSITIVE);
        for answer in as_each_host(|| under_default_control(own)) {
            // All but the payload of the NaN.
            assert_eq!(answer[..3], expected[..3]);
            assert!(f64::from_bits(answer[3]).is_nan());
        }
    }

    #[test]
    fn a_flushing_host_would_have_got_something_else() {
        let flushed = as_each_host(|| {
            let tiny = black_box(f64::MIN_POSITIVE) / black_box(8.0);
            (tiny * black_box(8.0)).to_bits()
        })[1];
        assert_ne!(
            flushed,
            f64::MIN_POSITIVE.to_bits(),
            "the checks above must be able to fail"
        );
    }

    #[test]
    fn guards_nest_and_survive_a_panic() {
        for (before, after) in as_each_host(|| {
            let before = environment();
            let result = std::panic::catch_unwind(|| {
                under_default_control(|| {
                    let _inner = FloatGuard::enter();
                    std::panic::resume_unwind(Box::new(()));
                })
            });
            assert!(result.is_err());
            (before, environment())
        }) {
            assert_eq!(before, after);
        }
    }
}
