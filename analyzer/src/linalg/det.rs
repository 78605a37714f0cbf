//! A determinant as a complex mantissa and a power of two.
//!
//! Products of thousands of pivots leave the range of doubles; this form never
//! does. Pure arithmetic, no matrices.

use num_complex::Complex64;

/// `mantissa * 2^exponent`; after normalisation the larger part of the
/// mantissa lies in [1, 2), or the mantissa is zero or not finite.
#[derive(Debug, Clone, Copy, PartialEq)]
pub struct ScaledDet {
    /// Complex factor of moderate size.
    pub mantissa: Complex64,
    /// Power of two.
    pub exponent: i64,
}

impl ScaledDet {
    /// The number one.
    pub const ONE: Self = Self {
        mantissa: Complex64::new(1.0, 0.0),
        exponent: 0,
    };

    /// A value that fails every comparison: stands for "not computed soundly".
    pub const INVALID: Self = Self {
        mantissa: Complex64::new(f64::NAN, f64::NAN),
        exponent: 0,
    };

    /// Normalised form of `mantissa * 2^exponent`.
    pub fn new(mantissa: Complex64, exponent: i64) -> Self {
        let size = mantissa.re.abs().max(mantissa.im.abs());
        if size == 0.0 {
            return Self {
                mantissa,
                exponent: 0,
            };
        }
        if !(mantissa.re.is_finite() && mantissa.im.is_finite()) {
            return Self { mantissa, exponent };
        }
        let shift = exponent_of(size);
        // Two steps keep both factors in range for subnormal and huge sizes.
        let half = -shift / 2;
        let scaled = mantissa * power_of_two(half) * power_of_two(-shift - half);
        Self {
            mantissa: scaled,
            exponent: exponent + i64::from(shift),
        }
    }

    /// Whether the value is a finite number (zero included).
    pub fn is_finite(&self) -> bool {
        self.mantissa.re.is_finite() && self.mantissa.im.is_finite()
    }

    /// Whether the value is exactly zero.
    pub fn is_zero(&self) -> bool {
        self.mantissa.re == 0.0 && self.mantissa.im == 0.0
    }

    /// Product.
    pub fn multiply(&self, other: &Self) -> Self {
        Self::new(
            self.mantissa * other.mantissa,
            self.exponent + other.exponent,
        )
    }

    /// Quotient `self / other`.
    pub fn ratio(&self, other: &Self) -> Self {
        Self::new(
            self.mantissa / other.mantissa,
            self.exponent - other.exponent,
        )
    }

    /// Principal argument in radians.
    pub fn phase(&self) -> f64 {
        self.mantissa.arg()
    }

    /// Natural logarithm with the principal argument as imaginary part.
    pub fn ln(&self) -> Complex64 {
        Complex64::new(
            self.mantissa.norm().ln() + self.exponent as f64 * std::f64::consts::LN_2,
            self.phase(),
        )
    }

    /// The value as an ordinary complex number; may overflow or underflow.
    pub fn to_complex(&self) -> Complex64 {
        let e = self.exponent.clamp(-2200, 2200) as i32;
        let third = e / 3;
        self.mantissa * power_of_two(third) * power_of_two(third) * power_of_two(e - 2 * third)
    }
}

/// Binary exponent of a positive finite number: `2^e <= x < 2^(e+1)`.
fn exponent_of(x: f64) -> i32 {
    let bits = ((x.to_bits() >> 52) & 0x7ff) as i32;
    if bits == 0 {
        // Subnormal: scale into the normal range first.
        return exponent_of(x * power_of_two(64)) - 64;
    }
    bits - 1023
}

/// `2^e` for `e` in -1022..=1023, saturating outside.
fn power_of_two(e: i32) -> f64 {
    f64::from_bits(((e.clamp(-1022, 1023) + 1023) as u64) << 52)
}

#[cfg(test)]
mod tests {
    use super::*;

    #[test]
    fn products_beyond_the_range_of_doubles_come_back() {
        let step = ScaledDet::new(Complex64::new(3e200, -4e200), 0);
        let mut product = ScaledDet::ONE;
        for _ in 0..50 {
            product = product.multiply(&step);
        }
        for _ in 0..50 {
            product = product.ratio(&step);
        }
        assert!(
            (product.to_complex() - 1.0).norm() < 1e-13,
            "50 factors out and back"
        );
        let ln = step.ln();
        assert!(
            (ln.re - 5e200f64.ln()).abs() < 1e-12,
            "logarithm of the modulus"
        );
        assert!((ln.im + (4.0f64 / 3.0).atan()).abs() < 1e-15, "argument");
    }

    #[test]
    fn extremes_normalise() {
        for x in [f64::MIN_POSITIVE / 1024.0, 1e308, 1.0, 0.75] {
            let d = ScaledDet::new(Complex64::new(0.0, x), 0);
            assert!((1.0..2.0).contains(&d.mantissa.im), "mantissa of {x:e}");
            assert_eq!(d.to_complex().im, x, "round trip of {x:e}");
        }
        assert!(
            ScaledDet::new(Complex64::new(0.0, 0.0), 7).is_zero(),
            "zero stays zero"
        );
        assert!(!ScaledDet::INVALID.is_finite(), "marker is not finite");
    }
}
