//! The prime field with p = 2^61 - 1 elements.
//!
//! A Mersenne prime: 2^61 = 1, so reduction is a shift and an add, and every
//! power of two in a double's exponent is a rotation. No matrices here.

use std::ops::{Add, Mul, Neg, Sub};

const P: u64 = (1 << 61) - 1;

/// An element of GF(2^61 - 1), always reduced.
#[derive(Debug, Clone, Copy, PartialEq, Eq, Hash, Default)]
pub struct Field61(u64);

impl Field61 {
    /// The additive identity.
    pub const ZERO: Self = Self(0);
    /// The multiplicative identity.
    pub const ONE: Self = Self(1);

    /// The residue of an integer.
    pub fn from_u64(x: u64) -> Self {
        let folded = (x & P) + (x >> 61);
        Self(if folded >= P { folded - P } else { folded })
    }

    /// The exact image of a double, mantissa times power of two; `None` for NaN
    /// and infinities.
    pub fn from_f64(x: f64) -> Option<Self> {
        if !x.is_finite() {
            return None;
        }
        let bits = x.to_bits();
        let biased = ((bits >> 52) & 0x7ff) as i64;
        let fraction = bits & ((1 << 52) - 1);
        let (mantissa, exponent) = if biased == 0 {
            (fraction, -1074)
        } else {
            (fraction | (1 << 52), biased - 1075)
        };
        let magnitude = Self::from_u64(mantissa) * Self(1 << exponent.rem_euclid(61));
        Some(if x < 0.0 { -magnitude } else { magnitude })
    }

    /// Multiplicative inverse by Fermat's theorem, x^(p-2); zero gives zero.
    pub fn inverse(self) -> Self {
        let mut result = Self::ONE;
        let mut base = self;
        let mut e = P - 2;
        while e > 0 {
            if e & 1 == 1 {
                result = result * base;
            }
            base = base * base;
            e >>= 1;
        }
        result
    }

    /// The inverses of many nonzero elements for the price of one and three products each (P. L.
    /// Montgomery, Math. Comp. 48, 1987, from memory).
    pub fn inverses(mut elements: Vec<Self>) -> Vec<Self> {
        let mut product = Self::ONE;
        let before: Vec<Self> = elements
            .iter()
            .map(|&element| {
                let before = product;
                product = product * element;
                before
            })
            .collect();
        let mut rest = product.inverse();
        for (element, before) in elements.iter_mut().zip(before).rev() {
            (rest, *element) = (rest * *element, rest * before);
        }
        elements
    }

    /// The reduced representative, below 2^61 - 1.
    pub fn value(self) -> u64 {
        self.0
    }
}

impl Add for Field61 {
    type Output = Self;
    #[inline]
    fn add(self, other: Self) -> Self {
        let sum = self.0 + other.0;
        Self(if sum >= P { sum - P } else { sum })
    }
}

impl Sub for Field61 {
    type Output = Self;
    #[inline]
    fn sub(self, other: Self) -> Self {
        let difference = self.0.wrapping_sub(other.0);
        Self(if self.0 < other.0 {
            difference.wrapping_add(P)
        } else {
            difference
        })
    }
}

impl Neg for Field61 {
    type Output = Self;
    fn neg(self) -> Self {
        Self::ZERO - self
    }
}

impl Mul for Field61 {
    type Output = Self;
    #[inline]
    fn mul(self, other: Self) -> Self {
        let wide = u128::from(self.0) * u128::from(other.0);
        let folded = (wide as u64 & P) + (wide >> 61) as u64;
        Self(if folded >= P { folded - P } else { folded })
    }
}

#[cfg(test)]
mod tests {
    use super::*;

    #[test]
    fn arithmetic_matches_wide_integers() {
        let (a, b) = (0x1234_5678_9abc_def0u64 % P, 0x0fed_cba9_8765_4321u64 % P);
        let expected = (u128::from(a) * u128::from(b) % u128::from(P)) as u64;
        assert_eq!(
            (Field61(a) * Field61(b)).0,
            expected,
            "product by 128-bit remainder"
        );
        assert_eq!(Field61(a) * Field61(a).inverse(), Field61::ONE, "inverse");
        assert_eq!(
            Field61(5) - Field61(7),
            Field61(P - 2),
            "negative difference"
        );
    }

    #[test]
    fn many_inverses_are_as_one_by_one() {
        let elements: Vec<Field61> = (1..40u64)
            .map(|k| Field61::from_u64(k.wrapping_mul(0x9e37_79b9_7f4a_7c15)))
            .collect();
        let one_by_one: Vec<Field61> = elements.iter().map(|e| e.inverse()).collect();
        assert_eq!(Field61::inverses(elements), one_by_one);
        assert_eq!(Field61::inverses(Vec::new()), []);
    }

    #[test]
    fn doubles_map_as_a_ring() {
        let f = |x: f64| Field61::from_f64(x).expect("finite");
        // Sums and products that are exact in doubles must be exact here.
        assert_eq!(f(0.375) + f(-1024.5), f(-1024.125), "sum");
        assert_eq!(
            f(1e-300_f64) * f(2f64.powi(1000)),
            f(1e-300 * 2f64.powi(1000)),
            "scaling"
        );
        assert_eq!(f(3.0) * f(0.125), f(0.375), "product");
        assert_eq!(
            f(5e-324) * f(2f64.powi(537)) * f(2f64.powi(537)),
            Field61::ONE,
            "subnormal"
        );
        assert_ne!(f(0.1) + f(0.2), f(0.3), "rounded sums are seen");
        assert!(Field61::from_f64(f64::NAN).is_none(), "no image of NaN");
    }
}
