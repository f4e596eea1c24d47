//! Run-time choice of vector instructions for loops over slices.
//!
//! A [`Kernel`] is plain scalar Rust, written once. [`dispatch`] compiles it three times (AVX-512,
//! AVX2 with FMA, and the target's baseline) and runs the widest that the processor has; the
//! compiler vectorises each copy. This is the only place in the crate with `unsafe`.
//!
//! AVX-512 and AVX2 copies fuse each multiply-add and agree bit for bit: the compiler keeps the order
//! of every sum. The baseline copy rounds twice and may differ in the last bits.
#![allow(unsafe_code)]

/// How a kernel copy multiplies and adds.
pub trait Arithmetic: Copy {
    /// a b + c, with one rounding where the instruction exists.
    fn mul_add(a: f64, b: f64, c: f64) -> f64;
}

/// One rounding: a fused instruction.
#[derive(Clone, Copy, Debug)]
pub struct Fused;

/// Two roundings: a multiplication, then an addition.
#[derive(Clone, Copy, Debug)]
pub struct Separate;

impl Arithmetic for Fused {
    #[inline(always)]
    #[allow(
        clippy::inline_always,
        reason = "must be compiled inside the feature copy"
    )]
    fn mul_add(a: f64, b: f64, c: f64) -> f64 {
        a.mul_add(b, c)
    }
}

impl Arithmetic for Separate {
    #[inline(always)]
    #[allow(
        clippy::inline_always,
        reason = "must be compiled inside the feature copy"
    )]
    #[allow(clippy::suboptimal_flops, reason = "no fused instruction on this copy")]
    fn mul_add(a: f64, b: f64, c: f64) -> f64 {
        a * b + c
    }
}

/// A loop over slices to be compiled for each instruction set.
///
/// `run` has to be `#[inline(always)]`, and so has everything it calls, to be compiled inside
/// the copies.
pub trait Kernel {
    /// What the kernel returns.
    type Output;
    /// Does the work with the given arithmetic.
    fn run<A: Arithmetic>(self) -> Self::Output;
}

/// Runs a kernel with the widest instructions that this processor has.
#[inline]
pub fn dispatch<K: Kernel>(kernel: K) -> K::Output {
    #[cfg(target_arch = "x86_64")]
    {
        if std::arch::is_x86_feature_detected!("avx512f")
            && std::arch::is_x86_feature_detected!("avx512dq")
            && std::arch::is_x86_feature_detected!("avx512vl")
        {
            // SAFETY: the three features that `run_avx512` is compiled with were just detected
            // (avx512f implies avx2 and fma); the kernel itself is safe code.
            return unsafe { run_avx512(kernel) };
        }
        if std::arch::is_x86_feature_detected!("avx2") && std::arch::is_x86_feature_detected!("fma")
        {
            // SAFETY: the two features that `run_avx2` is compiled with were just detected; the
            // kernel itself is safe code.
            return unsafe { run_avx2(kernel) };
        }
        kernel.run::<Separate>()
    }
    #[cfg(target_arch = "aarch64")]
    {
        kernel.run::<Fused>()
    }
    #[cfg(not(any(target_arch = "x86_64", target_arch = "aarch64")))]
    {
        kernel.run::<Separate>()
    }
}

#[cfg(target_arch = "x86_64")]
#[target_feature(enable = "avx512f,avx512dq,avx512vl")]
fn run_avx512<K: Kernel>(kernel: K) -> K::Output {
    kernel.run::<Fused>()
}

#[cfg(target_arch = "x86_64")]
#[target_feature(enable = "avx2,fma")]
fn run_avx2<K: Kernel>(kernel: K) -> K::Output {
    kernel.run::<Fused>()
}

/// Runs every copy that this processor has, the baseline first: for tests of their agreement.
#[cfg(test)]
pub(crate) fn dispatch_all<K: Kernel>(make: impl Fn() -> K) -> Vec<K::Output> {
    let mut outputs = vec![make().run::<Separate>()];
    #[cfg(target_arch = "x86_64")]
    {
        if std::arch::is_x86_feature_detected!("avx2") && std::arch::is_x86_feature_detected!("fma")
        {
            // SAFETY: detected on the line above.
            outputs.push(unsafe { run_avx2(make()) });
        }
        if std::arch::is_x86_feature_detected!("avx512f")
            && std::arch::is_x86_feature_detected!("avx512dq")
            && std::arch::is_x86_feature_detected!("avx512vl")
        {
            // SAFETY: detected on the lines above.
            outputs.push(unsafe { run_avx512(make()) });
        }
    }
    outputs
}
