//! Cost of reading text and of screening a block, by size.

#[allow(dead_code, unused_imports)]
#[path = "../../tests/it/amplifiers/mod.rs"]
mod amplifiers;

use criterion::{BatchSize, BenchmarkId, Criterion, Throughput, criterion_group, criterion_main};
use squeg_analyzer::cancel::Cancel;
use squeg_analyzer::host::{FileRole, Host, SourceText};
use squeg_analyzer::linalg::workspace::Workspace;
use squeg_analyzer::stability::{
    Solver, TwoPortWatch, active_sources, count, driving_points, natural_modes, participation,
};
use squeg_analyzer::sweep::frequency_grid;
use std::hint::black_box;
use std::time::Duration;

/// Ladders in subcircuits, `cards` cards in all.
fn ladders(cards: usize) -> String {
    let mut text = String::from("ladders\n");
    let subcircuits = cards / 100;
    for k in 0..subcircuits {
        text += &format!(".subckt lad{k} a b\n");
        let mut from = "a".to_owned();
        for j in 0..49 {
            let to = if j == 48 {
                "b".to_owned()
            } else {
                format!("n{j}")
            };
            text += &format!("R{j} {from} {to} {}\nC{j} {to} 0 {}p\n", 10 + j, 1 + j);
            from = to;
        }
        text += &format!(".ends\nX{k} x{k} x{} lad{k}\n", k + 1);
    }
    text + &format!("R0 x0 0 50\nR1 x{subcircuits} 0 50\n")
}

fn read(criterion: &mut Criterion) {
    let mut group = criterion.benchmark_group("text rules");
    for cards in [1_000, 10_000, 100_000] {
        let text = ladders(cards);
        group.throughput(Throughput::Elements(cards as u64));
        group.bench_with_input(BenchmarkId::from_parameter(cards), &text, |b, text| {
            b.iter(|| {
                let mut host = Host::new(|| Duration::ZERO);
                let file = host.add_file(SourceText::new(text.as_str()), FileRole::Top);
                black_box(host.prepare(file).findings().len())
            });
        });
    }
    group.finish();
}

fn screen(criterion: &mut Criterion) {
    let mut group = criterion.benchmark_group("screen, modes and all driving points");
    let texts = [
        (63, amplifiers::amplifier_63()),
        (200, amplifiers::amplifier_200(0)),
    ];
    for (unknowns, text) in &texts {
        // A host of its own each time: nothing is remembered.
        let prepare = || {
            let mut host = Host::new(|| Duration::ZERO);
            let file = host.add_file(SourceText::new(text.as_str()), FileRole::Top);
            host.prepare(file)
        };
        group.bench_function(BenchmarkId::from_parameter(unknowns), |b| {
            b.iter_batched(
                prepare,
                |prepared| black_box(prepared.screen(&Cancel::new()).map(|s| s.blocks.len())),
                BatchSize::SmallInput,
            );
        });
    }
    group.finish();
}

/// From a changed value, and from a changed comment, to the new findings of a host that knows the
/// block.
fn edits(criterion: &mut Criterion) {
    let text = amplifiers::amplifier_63();
    let mut group = criterion.benchmark_group("63 unknowns, after an edit");
    let swapped = |from: &str, to: &str| text.replacen(from, to, 1);
    let card = text
        .lines()
        .find(|line| line.starts_with('R'))
        .expect("a resistor");
    let words: Vec<&str> = card.split_whitespace().take(3).collect();
    let other = format!("{} 33.3", words.join(" "));
    let edits = [
        ("of a value", [text.clone(), swapped(card, &other)]),
        ("of a comment", [text.clone(), swapped("\n", "\n* seen\n")]),
    ];
    for (what, texts) in edits {
        let mut host = Host::new(|| Duration::ZERO);
        let file = host.add_file(SourceText::new(texts[0].as_str()), FileRole::Top);
        let mut turn = 0;
        group.bench_function(what, |b| {
            b.iter(|| {
                turn += 1;
                host.set_text(file, SourceText::new(texts[turn % 2].as_str()));
                let screened = host.prepare(file).screen(&Cancel::new());
                black_box(screened.map(|s| s.findings.len()))
            });
        });
    }
    group.finish();
}

/// The parts of one screen, on the amplifier of 63 unknowns and one of about 190.
fn parts(criterion: &mut Criterion) {
    let texts = [
        (63, amplifiers::amplifier_63()),
        (200, amplifiers::amplifier_200(0)),
    ];
    for (unknowns, text) in &texts {
        let mut host = Host::new(|| Duration::ZERO);
        let file = host.add_file(SourceText::new(text.as_str()), FileRole::Top);
        let prepared = host.prepare(file);
        let circuit = prepared.circuits().next().expect("a block");
        let active = active_sources(circuit, &[]);
        let solver = Solver::with_active(circuit, &active).expect("a system");
        let stop = || false;
        let on = natural_modes(&solver, false, 1500, None, &stop).expect("modes");
        let off = natural_modes(&solver, true, 1500, None, &stop).expect("modes");
        let seeds: Vec<(f64, f64)> = on.list.iter().map(|m| (m.hz(), m.damping())).collect();
        let grid = frequency_grid(1e3, 1e11, &seeds);
        let mut group = criterion.benchmark_group(format!("{unknowns} unknowns"));
        group.bench_function("text to findings", |b| {
            b.iter(|| {
                let mut host = Host::new(|| Duration::ZERO);
                let file = host.add_file(SourceText::new(text.as_str()), FileRole::Top);
                black_box(host.prepare(file).findings().len())
            });
        });
        group.bench_function("active sources", |b| {
            b.iter(|| black_box(active_sources(circuit, &[])));
        });
        group.bench_function("system, structure, plan", |b| {
            b.iter(|| black_box(Solver::with_active(circuit, &active).is_ok()));
        });
        group.bench_function("modes", |b| {
            b.iter(|| black_box(natural_modes(&solver, false, 1500, None, &stop).is_ok()));
        });
        group.bench_function("shares", |b| {
            b.iter(|| black_box(participation(&solver, circuit, &on.list).is_ok()));
        });
        group.bench_function("count", |b| {
            b.iter(|| black_box(count(&solver, Some(&on), Some(&off), &stop).is_ok()));
        });
        group.bench_function(
            format!("driving points and two-port, {} frequencies", grid.len()),
            |b| {
                b.iter(|| {
                    let mut two_port = TwoPortWatch::new(&solver, circuit);
                    let mut watch = |ws: &Workspace, hz: &[f64]| two_port.see(ws, hz);
                    let found = driving_points(&solver, &grid, None, &mut watch, &stop);
                    black_box((found.is_ok(), two_port.finish()))
                });
            },
        );
        group.finish();
    }
}

criterion_group! {
    name = benches;
    config = Criterion::default().sample_size(10).warm_up_time(Duration::from_millis(500)).measurement_time(Duration::from_secs(3));
    targets = read, screen, edits, parts
}
criterion_main!(benches);
