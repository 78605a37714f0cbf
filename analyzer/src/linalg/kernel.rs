//! Numeric kernels over lanes: one frequency a lane, real and imaginary parts
//! apart, so that plain loops over arrays become vector instructions.
//!
//! Generic over the lane count and over the use of fused multiply-add; called
//! only through `dispatch`. Kernels allocate nothing.

use crate::linalg::program::{NONE, Program};
use crate::linalg::selected::{Finish, Selected};
use crate::linalg::values::Values;

/// One complex number per lane.
#[derive(Debug, Clone, Copy)]
#[repr(C, align(64))]
pub(crate) struct Lane<const L: usize> {
    pub(crate) re: [f64; L],
    pub(crate) im: [f64; L],
}

impl<const L: usize> Lane<L> {
    pub(crate) const ZERO: Self = Self {
        re: [0.0; L],
        im: [0.0; L],
    };
    pub(crate) const NAN: Self = Self {
        re: [f64::NAN; L],
        im: [f64::NAN; L],
    };
}

/// Working numbers of one factorisation of `L` frequencies.
#[derive(Debug, Clone)]
pub(crate) struct Lanes<const L: usize> {
    /// The frequencies.
    pub(crate) s: Lane<L>,
    /// L and U in the order of `Program::targets`.
    pub(crate) lu: Vec<Lane<L>>,
    /// Reciprocal pivots.
    pub(crate) reciprocal: Vec<Lane<L>>,
    /// Delayed parts of A and of dA/ds.
    pub(crate) delayed: Vec<Lane<L>>,
    pub(crate) delayed_slope: Vec<Lane<L>>,
    /// Entries of the inverse in the order of `Selected::targets`.
    pub(crate) inverse: Vec<Lane<L>>,
    /// Right-hand side and solution in pivot order.
    pub(crate) x: Vec<Lane<L>>,
    pub(crate) det: Lane<L>,
    pub(crate) exponent: [i64; L],
    /// Largest squared multiplier.
    pub(crate) growth2: [f64; L],
    /// Zero while everything met was finite, NaN otherwise.
    pub(crate) taint: [f64; L],
    pub(crate) trace: Lane<L>,
}

#[inline(always)]
fn madd<const FMA: bool>(a: f64, b: f64, c: f64) -> f64 {
    // Without the instruction `mul_add` is a library call, many times slower.
    if FMA { a.mul_add(b, c) } else { a * b + c }
}

/// Sum of products `x[a] * y[b]` over index pairs, four independent chains.
#[inline(always)]
fn dot<const L: usize, const FMA: bool>(
    pairs: &[[u32; 2]],
    x: &[Lane<L>],
    y: &[Lane<L>],
) -> Lane<L> {
    let (mut rr, mut ii) = ([0.0; L], [0.0; L]);
    let (mut ri, mut ir) = ([0.0; L], [0.0; L]);
    for &[a, b] in pairs {
        let (a, b) = (&x[a as usize], &y[b as usize]);
        for l in 0..L {
            rr[l] = madd::<FMA>(a.re[l], b.re[l], rr[l]);
            ii[l] = madd::<FMA>(a.im[l], b.im[l], ii[l]);
            ri[l] = madd::<FMA>(a.re[l], b.im[l], ri[l]);
            ir[l] = madd::<FMA>(a.im[l], b.re[l], ir[l]);
        }
    }
    let mut sum = Lane::ZERO;
    for l in 0..L {
        sum.re[l] = rr[l] - ii[l];
        sum.im[l] = ri[l] + ir[l];
    }
    sum
}

#[inline(always)]
fn product<const L: usize, const FMA: bool>(a: &Lane<L>, b: &Lane<L>) -> Lane<L> {
    let mut p = Lane::ZERO;
    for l in 0..L {
        p.re[l] = madd::<FMA>(a.re[l], b.re[l], -(a.im[l] * b.im[l]));
        p.im[l] = madd::<FMA>(a.re[l], b.im[l], a.im[l] * b.re[l]);
    }
    p
}

#[inline(always)]
fn reciprocal<const L: usize, const FMA: bool>(a: &Lane<L>) -> Lane<L> {
    let mut r = Lane::ZERO;
    for l in 0..L {
        let scale = 1.0 / madd::<FMA>(a.re[l], a.re[l], a.im[l] * a.im[l]);
        r.re[l] = a.re[l] * scale;
        r.im[l] = -a.im[l] * scale;
    }
    r
}

/// Moves the size of the running product into the exponent.
#[inline(always)]
fn renormalise<const L: usize>(det: &mut Lane<L>, exponent: &mut [i64; L], taint: &mut [f64; L]) {
    for l in 0..L {
        let (re, im) = (det.re[l].abs(), det.im[l].abs());
        let size = if re > im { re } else { im };
        // A product near the end of the range is refused, never flushed to zero.
        taint[l] += if size < 1e300 { 0.0 } else { f64::NAN };
        let biased = size.to_bits() >> 52;
        let scale = f64::from_bits(2046u64.wrapping_sub(biased) << 52);
        det.re[l] *= scale;
        det.im[l] *= scale;
        exponent[l] += biased as i64 - 1023;
    }
}

/// Factorisation of A(s) for all lanes.
#[inline(always)]
pub(crate) fn factor<const L: usize, const FMA: bool>(
    program: &Program,
    values: &Values,
    w: &mut Lanes<L>,
) {
    let mut det = Lane::<L> {
        re: [program.sign; L],
        im: [0.0; L],
    };
    let (mut exponent, mut growth2, mut taint) = ([0i64; L], [0.0; L], [0.0; L]);
    let (mut target, mut pair) = (0usize, 0usize);
    for (k, &[upper_end, lower_end]) in program.ends.iter().enumerate() {
        let pivot = target;
        while target < upper_end as usize {
            w.lu[target] = entry::<L, FMA>(program, values, w, target, &mut pair);
            target += 1;
        }
        det = product::<L, FMA>(&det, &w.lu[pivot]);
        // Four factors of moderate size cannot leave the range of doubles.
        if k % 4 == 3 {
            renormalise(&mut det, &mut exponent, &mut taint);
        }
        let inverse = reciprocal::<L, FMA>(&w.lu[pivot]);
        w.reciprocal[k] = inverse;
        while target < lower_end as usize {
            let a = entry::<L, FMA>(program, values, w, target, &mut pair);
            let multiplier = product::<L, FMA>(&a, &inverse);
            for l in 0..L {
                let (re, im) = (multiplier.re[l], multiplier.im[l]);
                let size = madd::<FMA>(re, re, im * im);
                growth2[l] = if size > growth2[l] { size } else { growth2[l] };
                // Zero for finite numbers, NaN otherwise.
                taint[l] += size * 0.0;
            }
            w.lu[target] = multiplier;
            target += 1;
        }
    }
    renormalise(&mut det, &mut exponent, &mut taint);
    w.det = det;
    w.exponent = exponent;
    w.growth2 = growth2;
    w.taint = taint;
}

/// A(i,j) minus the products of the factors so far.
#[inline(always)]
fn entry<const L: usize, const FMA: bool>(
    program: &Program,
    values: &Values,
    w: &Lanes<L>,
    target: usize,
    pair: &mut usize,
) -> Lane<L> {
    let t = program.targets[target];
    let end = t.pairs_end as usize;
    let mut a = dot::<L, FMA>(&program.pairs[*pair..end], &w.lu, &w.lu);
    *pair = end;
    let (mut g, mut c) = (0.0, 0.0);
    if t.slot != NONE {
        g = values.g[t.slot as usize];
        c = values.c[t.slot as usize];
    }
    for l in 0..L {
        a.re[l] = madd::<FMA>(c, w.s.re[l], g) - a.re[l];
        a.im[l] = madd::<FMA>(c, w.s.im[l], -a.im[l]);
    }
    if t.delay != NONE {
        let d = &w.delayed[t.delay as usize];
        for l in 0..L {
            a.re[l] += d.re[l];
            a.im[l] += d.im[l];
        }
    }
    a
}

/// Selected entries of the inverse from the factors.
#[inline(always)]
pub(crate) fn invert<const L: usize, const FMA: bool>(selected: &Selected, w: &mut Lanes<L>) {
    let mut pair = 0usize;
    for (k, t) in selected.targets.iter().enumerate() {
        let end = t.pairs_end as usize;
        let mut sum = dot::<L, FMA>(&selected.pairs[pair..end], &w.lu, &w.inverse);
        pair = end;
        for l in 0..L {
            sum.re[l] = -sum.re[l];
            sum.im[l] = -sum.im[l];
        }
        if t.finish == Finish::Diagonal {
            for re in &mut sum.re {
                *re += 1.0;
            }
        }
        if t.finish != Finish::Lower {
            sum = product::<L, FMA>(&sum, &w.reciprocal[t.pivot as usize]);
        }
        w.inverse[k] = sum;
    }
}

/// tr(A^-1 dA/ds) from the selected inverse.
#[inline(always)]
pub(crate) fn trace<const L: usize, const FMA: bool>(
    slopes: &[(u32, f64)],
    delays: &[[u32; 2]],
    w: &mut Lanes<L>,
) {
    let mut sum = dot::<L, FMA>(delays, &w.inverse, &w.delayed_slope);
    for &(index, c) in slopes {
        let z = &w.inverse[index as usize];
        for l in 0..L {
            sum.re[l] = madd::<FMA>(c, z.re[l], sum.re[l]);
            sum.im[l] = madd::<FMA>(c, z.im[l], sum.im[l]);
        }
    }
    w.trace = sum;
}

/// Triangular lists of one substitution pass: pairs (factor entry, position
/// relative to the part already solved), with the end of each row's list.
#[derive(Debug, Clone, Default)]
pub(crate) struct Pass {
    pub(crate) pairs: Vec<[u32; 2]>,
    pub(crate) ends: Vec<u32>,
}

/// Forward substitution in place: x_i -= sum, then times the reciprocal pivot
/// when `scale`.
#[inline(always)]
pub(crate) fn forward<const L: usize, const FMA: bool>(pass: &Pass, scale: bool, w: &mut Lanes<L>) {
    let mut pair = 0usize;
    for (i, &end) in pass.ends.iter().enumerate() {
        let (done, rest) = w.x.split_at_mut(i);
        let end = end as usize;
        let sum = dot::<L, FMA>(&pass.pairs[pair..end], &w.lu, done);
        pair = end;
        settle::<L, FMA>(&mut rest[0], &sum, scale.then(|| &w.reciprocal[i]));
    }
}

/// Backward substitution in place, last position first.
#[inline(always)]
pub(crate) fn backward<const L: usize, const FMA: bool>(
    pass: &Pass,
    scale: bool,
    w: &mut Lanes<L>,
) {
    let mut pair = 0usize;
    let n = pass.ends.len();
    for (step, &end) in pass.ends.iter().enumerate() {
        let i = n - 1 - step;
        let (rest, done) = w.x.split_at_mut(i + 1);
        let end = end as usize;
        let sum = dot::<L, FMA>(&pass.pairs[pair..end], &w.lu, done);
        pair = end;
        settle::<L, FMA>(&mut rest[i], &sum, scale.then(|| &w.reciprocal[i]));
    }
}

#[inline(always)]
fn settle<const L: usize, const FMA: bool>(
    x: &mut Lane<L>,
    sum: &Lane<L>,
    factor: Option<&Lane<L>>,
) {
    for l in 0..L {
        x.re[l] -= sum.re[l];
        x.im[l] -= sum.im[l];
    }
    if let Some(factor) = factor {
        *x = product::<L, FMA>(x, factor);
    }
}

/// `coef * exp(-s tau)` and its derivative, summed per delayed part.
#[inline(always)]
pub(crate) fn delays<const L: usize, const FMA: bool>(
    values: &Values,
    delay_of: &[u32],
    w: &mut Lanes<L>,
) {
    for part in w.delayed.iter_mut().chain(&mut w.delayed_slope) {
        *part = Lane::ZERO;
    }
    let mut known = f64::NAN;
    let mut e = Lane::<L>::ZERO;
    for d in &values.delays {
        // Stamps of one element share the delay and follow each other.
        if d.tau != known {
            known = d.tau;
            for l in 0..L {
                let size = (-w.s.re[l] * d.tau).exp();
                let (sin, cos) = (-w.s.im[l] * d.tau).sin_cos();
                e.re[l] = size * cos;
                e.im[l] = size * sin;
            }
        }
        let part = delay_of[d.slot as usize] as usize;
        let slope = -d.tau * d.coef;
        for l in 0..L {
            let (a, b) = (&mut w.delayed[part], &mut w.delayed_slope[part]);
            a.re[l] = madd::<FMA>(d.coef, e.re[l], a.re[l]);
            a.im[l] = madd::<FMA>(d.coef, e.im[l], a.im[l]);
            b.re[l] = madd::<FMA>(slope, e.re[l], b.re[l]);
            b.im[l] = madd::<FMA>(slope, e.im[l], b.im[l]);
        }
    }
}
