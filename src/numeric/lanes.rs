//! Eight numbers at a time, on whatever vector unit the machine has.
//!
//! A plain build targets the oldest processor of its family; the kernels that matter are compiled
//! for several instruction sets and the best one is taken at run time (crate `pulp`, so no unsafe
//! code here). A [`Kernel`] is written once over [`Lanes`], which always holds eight numbers: one
//! register of eight, two of four, four of two, or eight scalars. Everything that a kernel calls
//! must be `#[inline(always)]`, else it is compiled for the oldest processor after all.

use pulp::{Arch, Simd, WithSimd};

/// Eight doubles in memory, aligned to a cache line.
#[derive(Debug, Clone, Copy, PartialEq)]
#[repr(C, align(64))]
pub struct Eight(pub [f64; 8]);

impl Eight {
    /// Eight zeros.
    pub const ZERO: Eight = Eight([0.0; 8]);
}

/// Eight doubles in registers.
#[derive(Debug, Clone, Copy)]
pub struct Lanes<S: Simd, const N: usize>([S::f64s; N]);

impl<S: Simd, const N: usize> Lanes<S, N> {
    /// The same number in every lane.
    #[inline(always)]
    pub fn splat(simd: S, value: f64) -> Self {
        Self([simd.splat_f64s(value); N])
    }

    /// Reads eight numbers.
    #[inline(always)]
    pub fn load(from: &Eight) -> Self {
        let (registers, _) = S::as_simd_f64s(&from.0);
        Self(std::array::from_fn(|i| registers[i]))
    }

    /// Writes eight numbers.
    #[inline(always)]
    pub fn store(self, to: &mut Eight) {
        let (registers, _) = S::as_mut_simd_f64s(&mut to.0);
        registers[..N].copy_from_slice(&self.0);
    }

    /// self + other.
    #[inline(always)]
    pub fn add(self, simd: S, other: Self) -> Self {
        Self(std::array::from_fn(|i| {
            simd.add_f64s(self.0[i], other.0[i])
        }))
    }

    /// self − other.
    #[inline(always)]
    pub fn sub(self, simd: S, other: Self) -> Self {
        Self(std::array::from_fn(|i| {
            simd.sub_f64s(self.0[i], other.0[i])
        }))
    }

    /// self × other.
    #[inline(always)]
    pub fn mul(self, simd: S, other: Self) -> Self {
        Self(std::array::from_fn(|i| {
            simd.mul_f64s(self.0[i], other.0[i])
        }))
    }

    /// self ÷ other.
    #[inline(always)]
    pub fn div(self, simd: S, other: Self) -> Self {
        Self(std::array::from_fn(|i| {
            simd.div_f64s(self.0[i], other.0[i])
        }))
    }

    /// Square roots.
    #[inline(always)]
    pub fn sqrt(self, simd: S) -> Self {
        Self(std::array::from_fn(|i| simd.sqrt_f64s(self.0[i])))
    }

    /// self × factor + addend, fused where the machine can.
    #[inline(always)]
    pub fn mul_add(self, simd: S, factor: Self, addend: Self) -> Self {
        Self(std::array::from_fn(|i| {
            simd.mul_add_e_f64s(self.0[i], factor.0[i], addend.0[i])
        }))
    }
}

/// Work that is compiled once per instruction set.
pub trait Kernel {
    /// What it returns.
    type Output;

    /// Runs on registers of `8 / N` doubles. Implementations are `#[inline(always)]`.
    fn run<S: Simd, const N: usize>(self, simd: S) -> Self::Output;
}

struct Adapter<K>(K);

impl<K: Kernel> WithSimd for Adapter<K> {
    type Output = K::Output;

    #[inline(always)]
    fn with_simd<S: Simd>(self, simd: S) -> K::Output {
        // Decided at compile time; exactly one arm survives per instruction set.
        match S::F64_LANES {
            8 => self.0.run::<S, 1>(simd),
            4 => self.0.run::<S, 2>(simd),
            2 => self.0.run::<S, 4>(simd),
            _ => self.0.run::<S, 8>(simd),
        }
    }
}

/// Runs a kernel on the best instruction set of this machine.
#[inline]
pub fn dispatch<K: Kernel>(kernel: K) -> K::Output {
    Arch::new().dispatch(Adapter(kernel))
}

#[cfg(test)]
mod tests {
    use super::*;

    struct Polynomial<'a>(&'a mut Eight);

    impl Kernel for Polynomial<'_> {
        type Output = ();

        #[inline(always)]
        fn run<S: Simd, const N: usize>(self, simd: S) {
            let x = Lanes::<S, N>::load(self.0);
            let one = Lanes::splat(simd, 1.0);
            let y = x
                .mul_add(simd, x, one)
                .sqrt(simd)
                .div(simd, one.add(simd, one));
            y.sub(simd, x.mul(simd, x)).store(self.0);
        }
    }

    #[test]
    fn every_lane_is_computed() {
        let mut numbers = Eight(std::array::from_fn(|i| i as f64 - 2.5));
        let before = numbers.0;
        dispatch(Polynomial(&mut numbers));
        for (x, y) in before.iter().zip(numbers.0) {
            let expected = (x * x + 1.0).sqrt() / 2.0 - x * x;
            assert!(
                (y - expected).abs() < 1e-14,
                "{x}: {y} instead of {expected}"
            );
        }
    }
}
