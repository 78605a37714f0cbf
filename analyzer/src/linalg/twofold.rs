//! Complex numbers with about 31 decimal digits, as unevaluated sums of doubles.
//!
//! T. J. Dekker, "A floating-point technique for extending the available
//! precision", Numer. Math. 18 (1971) (from memory). Slow; for the oracle only.

use num_complex::Complex64;

/// A real number `high + low`.
#[derive(Debug, Clone, Copy, PartialEq)]
pub(crate) struct Twofold {
    high: f64,
    low: f64,
}

impl Twofold {
    pub(crate) fn from(x: f64) -> Self {
        Self { high: x, low: 0.0 }
    }

    pub(crate) fn to_f64(self) -> f64 {
        self.high + self.low
    }

    /// Exact sum of two doubles when |a| >= |b|.
    fn quick(a: f64, b: f64) -> Self {
        let high = a + b;
        Self {
            high,
            low: b - (high - a),
        }
    }

    /// Exact sum of two doubles.
    fn sum(a: f64, b: f64) -> Self {
        let high = a + b;
        let part = high - a;
        Self {
            high,
            low: (a - (high - part)) + (b - part),
        }
    }

    pub(crate) fn add(self, o: Self) -> Self {
        let (s, t) = (Self::sum(self.high, o.high), Self::sum(self.low, o.low));
        let c = Self::quick(s.high, s.low + t.high);
        Self::quick(c.high, c.low + t.low)
    }

    pub(crate) fn negate(self) -> Self {
        Self {
            high: -self.high,
            low: -self.low,
        }
    }

    pub(crate) fn multiply(self, o: Self) -> Self {
        let high = self.high * o.high;
        let error = self.high.mul_add(o.high, -high);
        Self::quick(high, error + (self.high * o.low + self.low * o.high))
    }

    pub(crate) fn divide(self, o: Self) -> Self {
        let first = self.high / o.high;
        let rest = self.add(o.multiply(Self::from(first)).negate());
        let second = rest.high / o.high;
        let rest = rest.add(o.multiply(Self::from(second)).negate());
        Self::quick(first, second).add(Self::from(rest.high / o.high))
    }
}

/// A complex number of two [`Twofold`] parts.
#[derive(Debug, Clone, Copy, PartialEq)]
pub(crate) struct TwofoldComplex {
    re: Twofold,
    im: Twofold,
}

impl TwofoldComplex {
    pub(crate) fn from(z: Complex64) -> Self {
        Self {
            re: Twofold::from(z.re),
            im: Twofold::from(z.im),
        }
    }

    pub(crate) fn to_complex(self) -> Complex64 {
        Complex64::new(self.re.to_f64(), self.im.to_f64())
    }

    pub(crate) fn minus(self, o: Self) -> Self {
        Self {
            re: self.re.add(o.re.negate()),
            im: self.im.add(o.im.negate()),
        }
    }

    pub(crate) fn times(self, o: Self) -> Self {
        let re = self.re.multiply(o.re).add(self.im.multiply(o.im).negate());
        let im = self.re.multiply(o.im).add(self.im.multiply(o.re));
        Self { re, im }
    }

    pub(crate) fn over(self, o: Self) -> Self {
        let size = o.re.multiply(o.re).add(o.im.multiply(o.im));
        let conjugate = Self {
            re: o.re,
            im: o.im.negate(),
        };
        let p = self.times(conjugate);
        Self {
            re: p.re.divide(size),
            im: p.im.divide(size),
        }
    }
}

#[cfg(test)]
mod tests {
    use super::*;

    #[test]
    fn thirds_are_good_to_thirty_digits() {
        let third = Twofold::from(1.0).divide(Twofold::from(3.0));
        let rest = third.multiply(Twofold::from(3.0)).add(Twofold::from(-1.0));
        assert!(rest.to_f64().abs() < 1e-31, "3 * (1/3) - 1");
        let z = TwofoldComplex::from(Complex64::new(3.0, -4.0));
        let w = TwofoldComplex::from(Complex64::new(0.1, 0.7));
        let back = z.over(w).times(w).minus(z).to_complex();
        assert!(back.norm() < 1e-30, "division undone");
    }
}
