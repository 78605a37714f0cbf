//! Share of this core's floating-point peak that factorisation and selected inverse reach.
//!
//! `cargo bench -p squeg-analyzer --bench limit [-- NAME ..]` prints a table over the circuits of
//! `tests/race`. The peak is measured: independent chains of fused multiply-add in registers, as
//! wide as the machine goes. Operations are counted from the plan: 8 a complex multiply-add, 6 a
//! scaling of an entry of L, 10 a pivot, 4 an entry of A.
// The library has no clock and reads no files; a measuring program must. It also calls functions
// compiled for an instruction set that it has just detected.
#![allow(clippy::disallowed_methods, clippy::print_stdout, unsafe_code)]
// AVX-512 is stable from Rust 1.89 on; `linalg/dispatch.rs` needs it as well.
#![allow(clippy::incompatible_msrv)]

#[allow(dead_code)]
#[path = "../examples/stamped/mod.rs"]
mod stamped;

use num_complex::Complex64;
use stamped::{Circuit, axis, grid_hz};
use std::hint::black_box;
use std::path::Path;
use std::time::Instant;

const CIRCUITS: [&str; 7] = [
    "ladder30",
    "ladderRC60",
    "amp2",
    "amp2tl",
    "ladder200",
    "amp20",
    "mesh1000",
];
const ROUNDS: usize = 15;
/// Enough to hide four cycles of latency on two ports.
const CHAINS: usize = 12;
const PEAK_STEPS: usize = 200_000;

/// Defines the chains on registers of one width.
#[cfg(target_arch = "x86_64")]
macro_rules! chains {
    ($name:ident, $features:literal, $set:ident, $madd:ident, $sum:ident) => {
        #[target_feature(enable = $features)]
        fn $name(seed: f64) -> f64 {
            use std::arch::x86_64::*;
            let mut x = [$set(seed); CHAINS];
            let (a, b) = ($set(black_box(0.999_999)), $set(black_box(1e-6)));
            for _ in 0..PEAK_STEPS {
                for chain in &mut x {
                    *chain = $madd(*chain, a, b);
                }
            }
            // Every chain must be used, or it would not be computed.
            x.iter().map(|&chain| $sum(chain)).sum()
        }
    };
}

#[cfg(target_arch = "x86_64")]
chains!(
    chains_avx2,
    "avx2,fma",
    _mm256_set1_pd,
    _mm256_fmadd_pd,
    first_of_four
);
#[cfg(target_arch = "x86_64")]
chains!(
    chains_avx512,
    "avx512f,avx512dq,avx512vl,avx2,fma",
    _mm512_set1_pd,
    _mm512_fmadd_pd,
    _mm512_cvtsd_f64
);

#[cfg(target_arch = "x86_64")]
#[target_feature(enable = "avx2,fma")]
fn first_of_four(x: std::arch::x86_64::__m256d) -> f64 {
    std::arch::x86_64::_mm256_cvtsd_f64(x)
}

/// One chain a number without vector instructions: no peak, only a number to go on with.
fn chains_portable(seed: f64) -> f64 {
    let mut x = [seed; CHAINS];
    let (a, b) = (black_box(0.999_999), black_box(1e-6));
    for _ in 0..PEAK_STEPS {
        for chain in &mut x {
            *chain = *chain * a + b;
        }
    }
    x.iter().sum()
}

/// Numbers in one register and the function that fills them.
type Chains = (usize, &'static str, fn(f64) -> f64);

/// Every way this machine has.
fn ways() -> Vec<Chains> {
    let mut ways: Vec<Chains> = vec![(1, "portable", chains_portable)];
    #[cfg(target_arch = "x86_64")]
    {
        use std::arch::is_x86_feature_detected as has;
        if has!("avx2") && has!("fma") {
            // SAFETY: avx2 and fma were just detected.
            ways.push((4, "avx2+fma", |seed| unsafe { chains_avx2(seed) }));
            if has!("avx512f") && has!("avx512dq") && has!("avx512vl") {
                // SAFETY: avx512f, avx512dq, avx512vl, avx2 and fma were just detected.
                ways.push((8, "avx512", |seed| unsafe { chains_avx512(seed) }));
            }
        }
    }
    ways
}

/// Seconds of the fastest of `rounds` runs.
fn fastest(rounds: usize, mut run: impl FnMut() -> f64) -> f64 {
    (0..rounds).map(|_| run()).fold(f64::INFINITY, f64::min)
}

fn peak_gflops(&(width, _, run): &Chains) -> f64 {
    let seconds = fastest(5, || {
        let start = Instant::now();
        black_box(run(black_box(1.0)));
        start.elapsed().as_secs_f64()
    });
    (2 * width * CHAINS * PEAK_STEPS) as f64 / seconds / 1e9
}

/// A chain of dependent one-cycle operations: the clock in GHz.
fn clock_ghz() -> f64 {
    const STEPS: usize = 2_000_000;
    let seconds = fastest(5, || {
        let start = Instant::now();
        let mut x = black_box(1u64);
        for _ in 0..STEPS {
            // Hidden from the optimiser, so that the chain stays; in a register, so it costs nothing.
            x = rotate(x);
        }
        black_box(x);
        start.elapsed().as_secs_f64()
    });
    2.0 * STEPS as f64 / seconds / 1e9
}

/// Two dependent one-cycle operations that do not fold over iterations.
#[inline(always)]
fn rotate(x: u64) -> u64 {
    x.rotate_left(1) ^ 0x9e37_79b9
}

/// Operations of one factorisation and one selected inverse at one frequency.
fn operations(circuit: &Circuit, prepared: &stamped::Prepared) -> (f64, f64) {
    let plan = &prepared.plan;
    let (factor, inverse) = plan.multiply_adds();
    let n = circuit.unknowns;
    // L and U hold nearly the same number of entries beside the pivots.
    let lower = (plan.factor_entries() - n) / 2;
    let used = (0..plan.pattern().slots())
        .filter(|&k| prepared.on.g[k] != 0.0 || prepared.on.c[k] != 0.0)
        .count();
    // Every diagonal entry of the inverse is scaled once; upper ones are left out of the count.
    let factor_flop = 8 * factor + 6 * lower + 10 * n + 4 * used;
    (
        (factor_flop) as f64,
        (8 * inverse + 6 * circuit.nodes) as f64,
    )
}

/// Nanoseconds a frequency of factorisation and selected inverse, fastest of the rounds.
fn times_ns(prepared: &stamped::Prepared) -> Result<(f64, f64), Box<dyn std::error::Error>> {
    let (plan, mut ws) = (&prepared.plan, prepared.plan.workspace());
    let s: Vec<Complex64> = grid_hz(1e3, 1e11, plan.lanes())
        .iter()
        .map(|&hz| axis(hz))
        .collect();
    // As many calls as take about a millisecond.
    let start = Instant::now();
    plan.factor(&prepared.on, &s, &mut ws)?;
    let calls = (1e-3 / start.elapsed().as_secs_f64()).clamp(2.0, 1000.0) as usize;
    let mut fault = None;
    let mut factor = || {
        let start = Instant::now();
        for _ in 0..calls {
            fault = plan.factor(black_box(&prepared.on), &s, &mut ws).err();
        }
        start.elapsed().as_secs_f64()
    };
    let factor = fastest(ROUNDS, &mut factor);
    let mut invert = || {
        let start = Instant::now();
        for _ in 0..calls {
            fault = plan.invert_selected(black_box(&mut ws)).err();
        }
        start.elapsed().as_secs_f64()
    };
    let invert = fastest(ROUNDS, &mut invert);
    if let Some(fault) = fault {
        return Err(fault.into());
    }
    let per = 1e9 / (calls * s.len()) as f64;
    Ok((factor * per, invert * per))
}

fn main() -> Result<(), Box<dyn std::error::Error>> {
    let ways = ways();
    println!("clock about {:.2} GHz", clock_ghz());
    for way in &ways {
        println!("{}: {:.1} GFLOP/s", way.1, peak_gflops(way));
    }
    let best = &ways[ways.len() - 1];
    let named: Vec<String> = std::env::args()
        .skip(1)
        .filter(|a| !a.starts_with('-'))
        .collect();
    println!(
        "{:<11} {:>8} {:>8} {:>8} {:>8} {:>6} | {:>8} {:>8} {:>8} {:>6}",
        "circuit", "nnz(LU)", "madds", "flop", "ns", "peak", "madds", "flop", "ns", "peak"
    );
    let folder = Path::new(env!("CARGO_MANIFEST_DIR")).join("../tests/race");
    for name in CIRCUITS {
        if !(named.is_empty() || named.iter().any(|n| n == name)) {
            continue;
        }
        let text = std::fs::read_to_string(folder.join(format!("{name}.json")))?;
        let circuit = Circuit::read(&text)?;
        let prepared = circuit.prepare()?;
        let (factor_flop, inverse_flop) = operations(&circuit, &prepared);
        // Measured anew beside each circuit: the clock moves.
        let peak = peak_gflops(best);
        let (factor, inverse) = times_ns(&prepared)?;
        let (factor_madds, inverse_madds) = prepared.plan.multiply_adds();
        println!(
            "{name:<11} {:>8} {factor_madds:>8} {factor_flop:>8} {factor:>8.1} {:>5.1}% | {inverse_madds:>8} {inverse_flop:>8} {inverse:>8.1} {:>5.1}%",
            prepared.plan.factor_entries(),
            factor_flop / factor / peak * 100.0,
            inverse_flop / inverse / peak * 100.0,
        );
    }
    Ok(())
}
