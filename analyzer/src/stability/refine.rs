//! Roots and minima of driving-point impedances between grid points, many at once so that all lanes
//! of a batch do work.

use super::impedance::{Evaluator, is_negative};
use crate::linalg::error::NumericError;
use num_complex::Complex64;

/// Which part of Z is zero at a root.
#[derive(Clone, Copy, PartialEq, Eq, Debug)]
pub(super) enum Part {
    Real,
    Imaginary,
}

impl Part {
    fn of(self, z: Complex64) -> f64 {
        match self {
            Self::Real => z.re,
            Self::Imaginary => z.im,
        }
    }
}

/// A point that was evaluated: hertz and the part that shall vanish.
type Point = (f64, f64);

/// An interval in which a part of Z changes sign: `a` is the newest point, `b` the other end, `c`
/// the point that was given up last.
#[derive(Clone, Debug)]
pub(super) struct Bracket {
    /// Number of the probe.
    index: usize,
    part: Part,
    a: Point,
    b: Point,
    c: Option<Point>,
    /// Where to look next, as a share of the way from `a` to `b`.
    share: f64,
    best: Root,
}

/// A refined root.
#[derive(Clone, Copy, Debug)]
pub(super) struct Root {
    /// Number of the probe.
    pub(super) index: usize,
    /// Hertz.
    pub(super) hz: f64,
    /// The impedance there, ohms.
    pub(super) z: Complex64,
}

/// Relative width at which a root is good.
const WIDTH: f64 = 1e-11;

impl Bracket {
    pub(super) fn new(index: usize, part: Part, ends: [(f64, Complex64); 2]) -> Self {
        let [(low, at_low), (high, at_high)] = ends;
        let (a, b) = ((low, part.of(at_low)), (high, part.of(at_high)));
        let mut bracket = Self {
            index,
            part,
            a,
            b,
            c: None,
            share: 0.5,
            best: Root {
                index,
                hz: low,
                z: at_low,
            },
        };
        if a.1.abs() > b.1.abs() {
            bracket.best.hz = high;
            bracket.best.z = at_high;
        }
        // The chord first: the ends are near each other.
        let chord = a.1 / (a.1 - b.1);
        if chord.is_finite() {
            bracket.share = chord.clamp(0.02, 0.98);
        }
        bracket
    }

    fn next_hz(&self) -> f64 {
        self.a.0 + self.share * (self.b.0 - self.a.0)
    }

    /// Takes a new value in. Hybrid of inverse quadratic interpolation and bisection (T. R.
    /// Chandrupatla, Advances in Engineering Software 28, 1997, from memory); true when done.
    fn take(&mut self, hz: f64, z: Complex64) -> bool {
        let new = (hz, self.part.of(z));
        if (new.1 > 0.0) == (self.a.1 > 0.0) {
            self.c = Some(self.a);
        } else {
            self.c = Some(self.b);
            self.b = self.a;
        }
        self.a = new;
        if new.1.abs() <= self.part.of(self.best.z).abs() {
            (self.best.hz, self.best.z) = (hz, z);
        }
        let width = (self.b.0 - self.a.0).abs();
        let least = 0.5 * WIDTH * self.best.hz / width;
        if new.1 == 0.0 || !new.1.is_finite() || least >= 0.5 {
            return true;
        }
        self.share = self.quadratic().unwrap_or(0.5).clamp(least, 1.0 - least);
        false
    }

    /// The root of the parabola through the three points, hertz as a function of the value, where
    /// that is monotonic.
    fn quadratic(&self) -> Option<f64> {
        let (a, b, c) = (self.a, self.b, self.c?);
        let xi = (a.0 - b.0) / (c.0 - b.0);
        let phi = (a.1 - b.1) / (c.1 - b.1);
        let monotonic = phi * phi < xi && (1.0 - phi) * (1.0 - phi) < 1.0 - xi;
        let share = a.1 / (b.1 - a.1) * c.1 / (b.1 - c.1)
            + (c.0 - a.0) / (b.0 - a.0) * a.1 / (c.1 - a.1) * b.1 / (c.1 - b.1);
        (monotonic && share.is_finite()).then_some(share)
    }
}

/// Refines all brackets together to a relative width of 1e-11.
pub(super) fn roots(
    evaluator: &mut Evaluator<'_>,
    mut brackets: Vec<Bracket>,
) -> Result<Vec<Root>, NumericError> {
    const ROUNDS: usize = 120;
    let mut open: Vec<usize> = (0..brackets.len()).collect();
    for _ in 0..ROUNDS {
        if open.is_empty() {
            break;
        }
        let jobs: Vec<(usize, f64)> = open
            .iter()
            .map(|&k| (brackets[k].index, brackets[k].next_hz()))
            .collect();
        let z = evaluator.impedances(&jobs)?;
        let mut found = jobs.iter().zip(z);
        open.retain(|&k| match found.next() {
            Some((&(_, hz), z)) => !brackets[k].take(hz, z),
            None => false,
        });
    }
    Ok(brackets.into_iter().map(|bracket| bracket.best).collect())
}

/// The most negative conductance of a probe, between the neighbours of the best grid point.
#[derive(Clone, Debug)]
pub(super) struct Lowest {
    /// Number of the probe.
    pub(super) index: usize,
    /// Most negative conductance so far, siemens.
    pub(super) siemens: f64,
    /// Where, hertz.
    pub(super) hz: f64,
    low: Point,
    high: Point,
}

fn conductance(z: Complex64) -> f64 {
    z.re / z.norm_sqr()
}

impl Lowest {
    pub(super) fn new(index: usize, grid_hz: &[f64], z: &[Complex64]) -> Self {
        let figure = |z: &Complex64| {
            if is_negative(*z) {
                conductance(*z)
            } else {
                f64::INFINITY
            }
        };
        let best = (0..z.len())
            .min_by(|a, b| figure(&z[*a]).total_cmp(&figure(&z[*b])))
            .unwrap_or(0);
        let point = |k: usize| (grid_hz[k], conductance(z[k]));
        Self {
            index,
            siemens: conductance(z[best]),
            hz: grid_hz[best],
            low: point(best.saturating_sub(1)),
            high: point((best + 1).min(grid_hz.len() - 1)),
        }
    }

    /// The vertex of the parabola through the three points; otherwise a golden cut of the larger
    /// gap. `None` when nothing is left to gain.
    fn next_hz(&self, round: usize) -> Option<f64> {
        const GOLDEN: f64 = 0.381_966_011_250_105;
        const NARROW: f64 = 1e-7;
        let (below, above) = (self.hz - self.low.0, self.high.0 - self.hz);
        if below.max(above) <= NARROW * self.hz {
            return None;
        }
        let (fall, rise) = (
            (self.siemens - self.low.1) / below,
            (self.high.1 - self.siemens) / above,
        );
        let vertex = self.hz - 0.5 * (fall * above + rise * below) / (rise - fall);
        let step = (vertex - self.hz).abs();
        let inside = vertex > self.low.0 && vertex < self.high.0;
        if round % 3 != 2 && inside {
            // A vertex at the best point itself: there is nothing more to see.
            return (step > NARROW * self.hz).then_some(vertex);
        }
        Some(if below > above {
            self.hz - GOLDEN * below
        } else {
            self.hz + GOLDEN * above
        })
    }

    fn take(&mut self, hz: f64, z: Complex64) {
        let new = (hz, conductance(z));
        let old = (self.hz, self.siemens);
        if is_negative(z) && new.1 < self.siemens {
            if hz < self.hz {
                self.high = old;
            } else {
                self.low = old;
            }
            (self.hz, self.siemens) = new;
        } else if hz < self.hz {
            self.low = new;
        } else {
            self.high = new;
        }
    }
}

/// Searches all together.
pub(super) fn lowest(
    evaluator: &mut Evaluator<'_>,
    mut all: Vec<Lowest>,
) -> Result<Vec<Lowest>, NumericError> {
    const ROUNDS: usize = 20;
    let mut open: Vec<usize> = (0..all.len()).collect();
    for round in 0..ROUNDS {
        let mut jobs = Vec::with_capacity(open.len());
        open.retain(|&k| match all[k].next_hz(round) {
            Some(hz) => {
                jobs.push((all[k].index, hz));
                true
            }
            None => false,
        });
        if open.is_empty() {
            break;
        }
        let z = evaluator.impedances(&jobs)?;
        for ((&k, (_, hz)), z) in open.iter().zip(jobs).zip(z) {
            all[k].take(hz, z);
        }
    }
    Ok(all)
}
