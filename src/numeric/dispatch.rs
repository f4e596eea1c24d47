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

/// Instructions that kernels are compiled for.
#[derive(Clone, Copy, Debug, PartialEq, Eq, PartialOrd, Ord)]
pub enum InstructionSet {
    /// What every processor of the target has: SSE2 on x86-64, NEON with fused multiply-add on
    /// aarch64.
    Baseline,
    /// AVX2 with FMA: four numbers at a time.
    Avx2,
    /// AVX-512 F, DQ and VL: eight numbers at a time.
    Avx512,
}

impl InstructionSet {
    /// Every one, the narrowest first.
    pub const ALL: [Self; 3] = [Self::Baseline, Self::Avx2, Self::Avx512];

    /// Whether this processor has it.
    #[must_use]
    #[inline]
    pub fn is_available(self) -> bool {
        match self {
            Self::Baseline => true,
            #[cfg(target_arch = "x86_64")]
            Self::Avx2 => {
                std::arch::is_x86_feature_detected!("avx2")
                    && std::arch::is_x86_feature_detected!("fma")
            }
            #[cfg(target_arch = "x86_64")]
            Self::Avx512 => {
                std::arch::is_x86_feature_detected!("avx512f")
                    && std::arch::is_x86_feature_detected!("avx512dq")
                    && std::arch::is_x86_feature_detected!("avx512vl")
            }
            #[cfg(not(target_arch = "x86_64"))]
            Self::Avx2 | Self::Avx512 => false,
        }
    }

    /// The widest that this processor has: what [`dispatch`] uses.
    #[must_use]
    #[inline]
    pub fn widest() -> Self {
        if Self::Avx512.is_available() {
            Self::Avx512
        } else if Self::Avx2.is_available() {
            Self::Avx2
        } else {
            Self::Baseline
        }
    }
}

/// Runs a kernel with the widest instructions that this processor has.
#[inline]
pub fn dispatch<K: Kernel>(kernel: K) -> K::Output {
    match InstructionSet::widest() {
        InstructionSet::Baseline => run_baseline(kernel),
        // SAFETY: `widest` has just detected the features that the copy is compiled with (avx512f
        // implies avx2 and fma); the kernel itself is safe code.
        #[cfg(target_arch = "x86_64")]
        InstructionSet::Avx2 => unsafe { run_avx2(kernel) },
        // SAFETY: as above.
        #[cfg(target_arch = "x86_64")]
        InstructionSet::Avx512 => unsafe { run_avx512(kernel) },
        #[cfg(not(target_arch = "x86_64"))]
        InstructionSet::Avx2 | InstructionSet::Avx512 => run_baseline(kernel),
    }
}

/// Runs a kernel's copy for one instruction set, to compare copies; `None` where this processor
/// does not have it.
///
/// ```
/// use inrush::numeric::dispatch::{InstructionSet, dispatch_on};
/// use inrush::numeric::exponential::ExpInPlace;
/// let mut values = [1.0];
/// dispatch_on(InstructionSet::Baseline, ExpInPlace(&mut values)).expect("every processor has it");
/// assert!((values[0] - std::f64::consts::E).abs() < 1e-15);
/// ```
pub fn dispatch_on<K: Kernel>(instructions: InstructionSet, kernel: K) -> Option<K::Output> {
    if !instructions.is_available() {
        return None;
    }
    match instructions {
        InstructionSet::Baseline => Some(run_baseline(kernel)),
        // SAFETY: `is_available` has just detected the features that the copy is compiled with; the
        // kernel itself is safe code.
        #[cfg(target_arch = "x86_64")]
        InstructionSet::Avx2 => Some(unsafe { run_avx2(kernel) }),
        // SAFETY: as above.
        #[cfg(target_arch = "x86_64")]
        InstructionSet::Avx512 => Some(unsafe { run_avx512(kernel) }),
        #[cfg(not(target_arch = "x86_64"))]
        InstructionSet::Avx2 | InstructionSet::Avx512 => None,
    }
}

#[inline]
fn run_baseline<K: Kernel>(kernel: K) -> K::Output {
    #[cfg(target_arch = "aarch64")]
    {
        kernel.run::<Fused>()
    }
    #[cfg(not(target_arch = "aarch64"))]
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
    InstructionSet::ALL
        .into_iter()
        .filter_map(|instructions| dispatch_on(instructions, make()))
        .collect()
}
