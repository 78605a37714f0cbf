//! Random systems for the tests of this module.

use crate::linalg::pattern::Pattern;
use crate::linalg::values::Values;

/// SplitMix64 (G. L. Steele et al., OOPSLA 2014; from memory).
pub(crate) struct Random(u64);

impl Random {
    pub(crate) fn new(seed: u64) -> Self {
        Self(seed.wrapping_mul(0x9e37_79b9_7f4a_7c15) ^ 0x1234_5678_9abc_def1)
    }
    pub(crate) fn next(&mut self) -> u64 {
        self.0 = self.0.wrapping_add(0x9e37_79b9_7f4a_7c15);
        let mut z = self.0;
        z = (z ^ (z >> 30)).wrapping_mul(0xbf58_476d_1ce4_e5b9);
        z = (z ^ (z >> 27)).wrapping_mul(0x94d0_49bb_1331_11eb);
        z ^ (z >> 31)
    }
    pub(crate) fn unit(&mut self) -> f64 {
        (self.next() >> 11) as f64 / (1u64 << 53) as f64
    }
    pub(crate) fn below(&mut self, n: usize) -> usize {
        (self.next() % n as u64) as usize
    }
    /// Log-uniform between two powers of ten.
    pub(crate) fn decades(&mut self, lo: f64, hi: f64) -> f64 {
        10f64.powf(lo + (hi - lo) * self.unit())
    }
}

/// Unsummed entries of a system; index 0 is left out (the reference).
#[derive(Debug, Clone, Default)]
pub(crate) struct Stamps {
    pub(crate) n: usize,
    pub(crate) g: Vec<(u32, u32, f64)>,
    pub(crate) c: Vec<(u32, u32, f64)>,
    pub(crate) delays: Vec<(u32, u32, f64, f64)>,
}

impl Stamps {
    pub(crate) fn new(nodes: usize) -> Self {
        Self {
            n: nodes,
            ..Self::default()
        }
    }
    fn put(list: &mut Vec<(u32, u32, f64)>, i: usize, j: usize, v: f64) {
        if i > 0 && j > 0 {
            list.push((i as u32 - 1, j as u32 - 1, v));
        }
    }
    fn four(
        list: &mut Vec<(u32, u32, f64)>,
        (p, q): (usize, usize),
        (a, b): (usize, usize),
        v: f64,
    ) {
        Self::put(list, p, a, v);
        Self::put(list, p, b, -v);
        Self::put(list, q, a, -v);
        Self::put(list, q, b, v);
    }
    pub(crate) fn conductance(&mut self, a: usize, b: usize, v: f64) {
        Self::four(&mut self.g, (a, b), (a, b), v);
    }
    pub(crate) fn capacitance(&mut self, a: usize, b: usize, v: f64) {
        Self::four(&mut self.c, (a, b), (a, b), v);
    }
    pub(crate) fn source(&mut self, p: usize, q: usize, cp: usize, cn: usize, v: f64) {
        Self::four(&mut self.g, (p, q), (cp, cn), v);
    }
    pub(crate) fn delayed_source(
        &mut self,
        p: usize,
        q: usize,
        cp: usize,
        cn: usize,
        v: f64,
        tau: f64,
    ) {
        let mut list = Vec::new();
        Self::four(&mut list, (p, q), (cp, cn), v);
        self.delays
            .extend(list.into_iter().map(|(r, c, v)| (r, c, v, tau)));
    }
    /// A branch current between `a` and `b`; returns its unknown (1-based).
    pub(crate) fn branch(&mut self, a: usize, b: usize) -> usize {
        self.n += 1;
        let k = self.n;
        for (node, sign) in [(a, 1.0), (b, -1.0)] {
            Self::put(&mut self.g, node, k, sign);
            Self::put(&mut self.g, k, node, sign);
        }
        k
    }
    pub(crate) fn inductance(&mut self, a: usize, b: usize, v: f64) -> usize {
        let k = self.branch(a, b);
        Self::put(&mut self.c, k, k, -v);
        k
    }
    pub(crate) fn short(&mut self, a: usize, b: usize) -> usize {
        self.branch(a, b)
    }
    pub(crate) fn pattern(&self) -> std::sync::Arc<Pattern> {
        let entries: Vec<(u32, u32)> = self
            .g
            .iter()
            .chain(&self.c)
            .map(|e| (e.0, e.1))
            .chain(self.delays.iter().map(|d| (d.0, d.1)))
            .collect();
        Pattern::new(self.n, &entries)
    }
    pub(crate) fn values_on(&self, pattern: std::sync::Arc<Pattern>) -> Values {
        let mut values = Values::new(pattern);
        for &(r, c, v) in &self.g {
            values.add_g(r, c, v).expect("in pattern");
        }
        for &(r, c, v) in &self.c {
            values.add_c(r, c, v).expect("in pattern");
        }
        for &(r, c, v, tau) in &self.delays {
            values.add_delay(r, c, v, tau).expect("in pattern");
        }
        values
    }
    pub(crate) fn values(&self) -> Values {
        self.values_on(self.pattern())
    }
}

/// A random connected network with branches, controlled sources and delays.
pub(crate) fn random_network(seed: u64, delays: bool) -> Stamps {
    let mut random = Random::new(seed);
    let nodes = 3 + random.below(18);
    let mut st = Stamps::new(nodes);
    for a in 1..=nodes {
        let b = random.below(a);
        st.conductance(a, b, random.decades(-4.0, 2.0));
        if random.unit() < 0.6 {
            st.capacitance(a, random.below(a), random.decades(-5.0, 3.0));
        }
    }
    for _ in 0..nodes / 2 {
        let (a, b) = (1 + random.below(nodes), random.below(nodes));
        if a != b {
            st.inductance(a, b, random.decades(-4.0, 4.0));
        }
    }
    for k in 0..1 + nodes / 6 {
        let (p, cp) = (1 + random.below(nodes), 1 + random.below(nodes));
        let gm = random.decades(-2.0, 2.0) * if random.unit() < 0.5 { -1.0 } else { 1.0 };
        if delays && k % 2 == 0 {
            st.delayed_source(p, 0, cp, 0, gm, random.decades(-3.0, 0.0));
        } else {
            st.source(p, 0, cp, 0, gm);
        }
    }
    // A forced voltage through a node of its own: a saddle-point row.
    let a = 1 + random.below(nodes);
    st.n += 1;
    let own = st.n;
    st.conductance(own, 0, random.decades(-3.0, 1.0));
    st.short(a, own);
    st
}
