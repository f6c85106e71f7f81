/*
 * narrow_processor.h: makes the processor seem to have narrower vectors than it has. The instruction `cpuid`, by which a
 * program learns what the processor can do, is made to fault (Linux arch_prctl(2), ARCH_SET_CPUID) and answered without
 * what is to be hidden. Bits as in the Intel Software Developer's Manual, volume 2A, CPUID.
 */
#ifndef NARROW_PROCESSOR_H
#define NARROW_PROCESSOR_H

static unsigned long cpuid_answers; /* so often was a feature asked for and the answer was ours */

#if defined(__x86_64__) && defined(__linux__)
#include <cpuid.h>
#include <errno.h>
#include <signal.h>
#include <string.h>
#include <sys/syscall.h>
#include <ucontext.h>
#include <unistd.h>

#define SET_CPUID 0x1012
static int hides_avx; /* all of it; otherwise only what is wider than 256 bits */

/* Signal handlers have the right to this call, and to the instruction. */
static void answer_cpuid(int number, siginfo_t *info, void *context)
{
    greg_t *registers = ((ucontext_t *)context)->uc_mcontext.gregs;
    const unsigned char *at = (const unsigned char *)registers[REG_RIP];
    unsigned a, b, c, d, leaf = (unsigned)registers[REG_RAX], part = (unsigned)registers[REG_RCX];
    (void)info;
    if (at[0] != 0x0f || at[1] != 0xa2) {
        signal(number, SIG_DFL); /* a fault of another kind: it comes again, and is not ours */
        return;
    }
    syscall(SYS_arch_prctl, SET_CPUID, 1UL);
    __cpuid_count(leaf, part, a, b, c, d);
    syscall(SYS_arch_prctl, SET_CPUID, 0UL);
    if (leaf == 1 && hides_avx) c &= ~(1u << 12 | 1u << 27 | 1u << 28 | 1u << 29); /* FMA, OSXSAVE, AVX, F16C */
    if (leaf == 7 && part == 0) {
        if (hides_avx) b &= ~(1u << 5);                                               /* AVX2 */
        b &= ~(1u << 16 | 1u << 17 | 1u << 21 | 1u << 26 | 1u << 27 | 1u << 28 | 1u << 30 | 1u << 31); /* AVX-512 */
        c &= ~(1u << 1 | 1u << 6 | 1u << 9 | 1u << 10 | 1u << 11 | 1u << 12 | 1u << 14);
        d &= ~(1u << 2 | 1u << 3 | 1u << 8 | 1u << 23);
    }
    if (leaf == 7 && part > 0) a = b = c = d = 0;
    if (leaf == 0x19 || leaf == 0x24) a = b = c = d = 0; /* key locker, AVX10 */
    if (leaf == 1 || leaf == 7) __atomic_fetch_add(&cpuid_answers, 1, __ATOMIC_RELAXED);
    registers[REG_RAX] = a, registers[REG_RBX] = b, registers[REG_RCX] = c, registers[REG_RDX] = d;
    registers[REG_RIP] += 2;
}

/* Threads of the library take no signals, and a fault that is blocked ends the process: the library finds this function
 * before that of the C library, and faults stay unblocked. */
int pthread_sigmask(int how, const sigset_t *set, sigset_t *before)
{
    sigset_t open;
    if (set) open = *set, sigdelset(&open, SIGSEGV);
    return sigprocmask(how, set ? &open : NULL, before) == 0 ? 0 : errno;
}

/* Hides vectors wider than 128 bits, or than 256 bits, from this thread and those that it makes; 0 when this machine
 * has no way to do so. */
static int hide_wide_vectors(int widest)
{
    struct sigaction action;
    memset(&action, 0, sizeof action);
    action.sa_sigaction = answer_cpuid, action.sa_flags = SA_SIGINFO;
    hides_avx = widest < 256;
    return sigaction(SIGSEGV, &action, NULL) == 0 && syscall(SYS_arch_prctl, SET_CPUID, 0UL) == 0;
}
#else
static int hide_wide_vectors(int widest)
{
    (void)widest;
    return 0;
}
#endif
#endif
