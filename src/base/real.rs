//! The two storage precisions, f32 and f64, behind one sealed trait; every sum and every measured value is f64.

use std::fmt::{Debug, Display};
use std::ops::{Add, AddAssign, Div, Mul, Neg, Sub};

mod sealed {
    pub trait Sealed {}
    impl Sealed for f32 {}
    impl Sealed for f64 {}
}

/// A storage precision of field values.
pub trait Real:
    sealed::Sealed
    + Copy
    + Send
    + Sync
    + Default
    + PartialOrd
    + PartialEq
    + Debug
    + Display
    + bytemuck::Pod
    + Add<Output = Self>
    + Sub<Output = Self>
    + Mul<Output = Self>
    + Div<Output = Self>
    + Neg<Output = Self>
    + AddAssign
    + 'static
{
    /// `"f32"` or `"f64"`.
    const NAME: &'static str;
    /// Zero.
    const ZERO: Self;
    /// Distance from 1 to the next larger value, as f64.
    const EPSILON: f64;
    /// Nearest value of this precision.
    fn of(x: f64) -> Self;
    /// Exact widening.
    fn wide(self) -> f64;
    /// Square root.
    fn sqrt(self) -> Self;
    /// Absolute value.
    fn abs(self) -> Self;
    /// Neither NaN nor infinite.
    fn is_finite(self) -> bool;
    /// The larger of two values; NaN-free inputs.
    fn greater(self, other: Self) -> Self;
    /// The smaller of two values; NaN-free inputs.
    fn lesser(self, other: Self) -> Self;
}

macro_rules! real {
    ($t:ident) => {
        impl Real for $t {
            const NAME: &'static str = stringify!($t);
            const ZERO: Self = 0.0;
            const EPSILON: f64 = $t::EPSILON as f64;
            #[inline(always)]
            fn of(x: f64) -> Self {
                x as $t
            }
            #[inline(always)]
            fn wide(self) -> f64 {
                self as f64
            }
            #[inline(always)]
            fn sqrt(self) -> Self {
                $t::sqrt(self)
            }
            #[inline(always)]
            fn abs(self) -> Self {
                $t::abs(self)
            }
            #[inline(always)]
            fn is_finite(self) -> bool {
                $t::is_finite(self)
            }
            #[inline(always)]
            fn greater(self, other: Self) -> Self {
                if self > other { self } else { other }
            }
            #[inline(always)]
            fn lesser(self, other: Self) -> Self {
                if self < other { self } else { other }
            }
        }
    };
}
real!(f32);
real!(f64);
