//! One side of `tests/reference/race.py`: the whole job per frequency on one thread, and its cost.
//!
//! `race FILE [--points N] [--repeats N] [--low HZ] [--high HZ] [--check HZ,HZ,..]` prints one JSON
//! line. The job: (a, b) both determinants and their ratio, (c) every driving-point impedance,
//! (d) d ln det / ds, (e) S-parameters at the ports.
// The library has no clock and reads no files; a measuring program must.
#![allow(clippy::disallowed_methods, clippy::print_stdout)]

// The bench beside shares this module and reads other parts of it.
#[allow(dead_code)]
mod stamped;

use num_complex::Complex64;
use squeg_analyzer::linalg::det::ScaledDet;
use squeg_analyzer::linalg::error::NumericError;
use squeg_analyzer::linalg::workspace::Workspace;
use stamped::{Circuit, Prepared, R0_OHM, axis, grid_hz};
use std::fmt::Write;
use std::hint::black_box;
use std::time::Instant;

/// What the command line says.
struct Options {
    file: String,
    points: usize,
    repeats: usize,
    low_hz: f64,
    high_hz: f64,
    check_hz: Vec<f64>,
}

impl Options {
    fn read(mut words: impl Iterator<Item = String>) -> Result<Self, String> {
        let mut options = Self {
            file: words.next().ok_or("no file")?,
            points: 512,
            repeats: 5,
            low_hz: 1e3,
            high_hz: 1e11,
            check_hz: Vec::new(),
        };
        while let Some(key) = words.next() {
            let value = words.next().ok_or(format!("{key} without a value"))?;
            let fault = |_| format!("{key} {value}");
            let whole = || value.parse::<usize>().map_err(|_| format!("{key} {value}"));
            match key.as_str() {
                "--points" => options.points = whole()?,
                "--repeats" => options.repeats = whole()?,
                "--low" => options.low_hz = value.parse().map_err(fault)?,
                "--high" => options.high_hz = value.parse().map_err(fault)?,
                "--check" => {
                    let all: Result<_, _> = value.split(',').map(str::parse).collect();
                    options.check_hz = all.map_err(fault)?;
                }
                _ => return Err(format!("unknown option {key}")),
            }
        }
        Ok(options)
    }
}

/// Numbers of the inverse entries that the job reads.
struct Places {
    nodes: Vec<usize>,
    ports: Vec<usize>,
    /// 2 / sqrt(z0i z0j) and delta of each port pair.
    scale: Vec<(f64, f64)>,
}

impl Places {
    fn new(circuit: &Circuit, prepared: &Prepared) -> Result<Self, String> {
        let find = |row, column| {
            let index = prepared.plan.inverse_index(row, column);
            index.ok_or("a wanted entry is not in the plan".to_owned())
        };
        let nodes: Result<_, _> = (0..circuit.nodes as u32).map(|k| find(k, k)).collect();
        let (mut ports, mut scale) = (Vec::new(), Vec::new());
        for &(to, to_ohm) in &circuit.ports {
            for &(from, from_ohm) in &circuit.ports {
                ports.push(find(to - 1, from - 1)?);
                let delta = f64::from(u8::from(to == from));
                scale.push((2.0 * R0_OHM / (to_ohm * from_ohm).sqrt(), delta));
            }
        }
        Ok(Self {
            nodes: nodes?,
            ports,
            scale,
        })
    }
}

/// Everything the job produces; entries of a group of frequencies lie together.
struct Results {
    det: Vec<ScaledDet>,
    ratio: Vec<ScaledDet>,
    log_derivative: Vec<Complex64>,
    z_ohm: Vec<Complex64>,
    s_parameters: Vec<Complex64>,
}

impl Results {
    fn new(points: usize, places: &Places) -> Self {
        let zero = Complex64::new(0.0, 0.0);
        Self {
            det: vec![ScaledDet::ONE; points],
            ratio: vec![ScaledDet::ONE; points],
            log_derivative: vec![zero; points],
            z_ohm: vec![zero; points * places.nodes.len()],
            s_parameters: vec![zero; points * places.ports.len()],
        }
    }
}

/// The whole job at all frequencies.
fn job(
    prepared: &Prepared,
    places: &Places,
    s: &[Complex64],
    ws: &mut Workspace,
    out: &mut Results,
) -> Result<(), NumericError> {
    let plan = &prepared.plan;
    for (group, s) in s.chunks(plan.lanes()).enumerate() {
        let first = group * plan.lanes();
        plan.factor_sound(&prepared.off, s, ws)?;
        let mut passive = [ScaledDet::ONE; 16];
        for (lane, det) in passive.iter_mut().enumerate().take(s.len()) {
            *det = ws.det(lane);
        }
        plan.factor_sound(&prepared.on, s, ws)?;
        plan.invert_selected(ws)?;
        for (lane, passive) in passive.iter().enumerate().take(s.len()) {
            let det = ws.det(lane);
            out.det[first + lane] = det;
            out.ratio[first + lane] = det.ratio(passive);
            out.log_derivative[first + lane] = ws.log_derivative(lane);
        }
        let z_ohm = &mut out.z_ohm[first * places.nodes.len()..];
        for (&index, z) in places.nodes.iter().zip(z_ohm.chunks_exact_mut(s.len())) {
            ws.inverse_lanes(index, z);
            for z in z {
                *z *= R0_OHM;
            }
        }
        let ports = &mut out.s_parameters[first * places.ports.len()..];
        let ports = ports.chunks_exact_mut(s.len());
        for ((&index, &(scale, delta)), port) in places.ports.iter().zip(&places.scale).zip(ports) {
            ws.inverse_lanes(index, port);
            for value in port {
                *value = *value * scale - delta;
            }
        }
    }
    Ok(())
}

/// Median of `repeats` runs in microseconds a point; the first run of all warms up.
fn median_us<E>(
    repeats: usize,
    points: usize,
    mut run: impl FnMut() -> Result<f64, E>,
) -> Result<f64, E> {
    run()?;
    let mut seconds = Vec::with_capacity(repeats);
    for _ in 0..repeats.max(1) {
        seconds.push(run()?);
    }
    seconds.sort_by(f64::total_cmp);
    Ok(seconds[seconds.len() / 2] * 1e6 / points as f64)
}

/// Microseconds a point of one part of the job.
struct Costs {
    job: f64,
    det: f64,
    both_dets: f64,
    inverse: f64,
}

fn measure(options: &Options, prepared: &Prepared, places: &Places) -> Result<Costs, NumericError> {
    let s: Vec<Complex64> = grid_hz(options.low_hz, options.high_hz, options.points)
        .iter()
        .map(|&hz| axis(hz))
        .collect();
    let (plan, mut ws) = (&prepared.plan, prepared.plan.workspace());
    let mut out = Results::new(s.len(), places);
    let median = |run: &mut dyn FnMut() -> Result<f64, NumericError>| {
        median_us(options.repeats, options.points, run)
    };
    let whole = median(&mut || {
        let start = Instant::now();
        job(prepared, places, &s, &mut ws, &mut out)?;
        black_box(&out.z_ohm);
        Ok(start.elapsed().as_secs_f64())
    })?;
    let dets = |both: bool, ws: &mut Workspace| {
        let start = Instant::now();
        for s in s.chunks(plan.lanes()) {
            if both {
                plan.factor_sound(&prepared.off, s, ws)?;
                black_box(ws.det(0));
            }
            plan.factor_sound(&prepared.on, s, ws)?;
            for lane in 0..s.len() {
                black_box(ws.det(lane));
            }
        }
        Ok(start.elapsed().as_secs_f64())
    };
    let det = median(&mut || dets(false, &mut ws))?;
    let both_dets = median(&mut || dets(true, &mut ws))?;
    let inverse = median(&mut || {
        let mut seconds = 0.0;
        for s in s.chunks(plan.lanes()) {
            plan.factor_sound(&prepared.on, s, &mut ws)?;
            let start = Instant::now();
            // Several times, so that reading the clock does not count.
            for _ in 0..4 {
                plan.invert_selected(&mut ws)?;
            }
            seconds += start.elapsed().as_secs_f64() / 4.0;
        }
        Ok(seconds)
    })?;
    Ok(Costs {
        job: whole,
        det,
        both_dets,
        inverse,
    })
}

/// Lanes that the common pivot order does not serve, of `on` and `off` together, over the grid.
fn repaired(options: &Options, prepared: &Prepared) -> Result<usize, NumericError> {
    let mut ws = prepared.plan.workspace();
    let mut count = 0;
    for hz in grid_hz(options.low_hz, options.high_hz, options.points).chunks(prepared.plan.lanes())
    {
        let s: Vec<Complex64> = hz.iter().map(|&hz| axis(hz)).collect();
        for values in [&prepared.on, &prepared.off] {
            prepared.plan.factor(values, &s, &mut ws)?;
            count += (0..s.len()).filter(|&lane| !ws.is_sound(lane)).count();
        }
    }
    Ok(count)
}

fn instruction_set() -> &'static str {
    #[cfg(target_arch = "x86_64")]
    {
        use std::arch::is_x86_feature_detected as has;
        if has!("avx512f") && has!("avx512dq") && has!("avx512vl") && has!("avx2") && has!("fma") {
            return "avx512f+avx512dq+avx512vl+avx2+fma";
        }
        if has!("avx2") && has!("fma") {
            return "avx2+fma";
        }
    }
    "portable"
}

fn pair(z: Complex64) -> String {
    format!("[{:e},{:e}]", z.re, z.im)
}

fn list(all: impl Iterator<Item = Complex64>) -> String {
    let all: Vec<String> = all.map(pair).collect();
    format!("[{}]", all.join(","))
}

/// The results at the frequencies to be compared, as members of a JSON object.
fn checked(
    options: &Options,
    prepared: &Prepared,
    places: &Places,
) -> Result<String, NumericError> {
    let mut ws = prepared.plan.workspace();
    let mut lines = Vec::new();
    for &hz in &options.check_hz {
        let mut out = Results::new(1, places);
        job(prepared, places, &[axis(hz)], &mut ws, &mut out)?;
        lines.push(format!(
            "{{\"hz\":{hz:e},\"ln_det\":{},\"ndf\":{},\"d_ln_det_ds\":{},\"z_ohm\":{},\"s\":{}}}",
            pair(out.det[0].ln()),
            pair(out.ratio[0].to_complex()),
            pair(out.log_derivative[0]),
            list(out.z_ohm.into_iter()),
            list(out.s_parameters.into_iter()),
        ));
    }
    Ok(lines.join(","))
}

fn main() -> Result<(), Box<dyn std::error::Error>> {
    let options = Options::read(std::env::args().skip(1))?;
    let circuit = Circuit::read(&std::fs::read_to_string(&options.file)?)?;
    let start = Instant::now();
    let prepared = circuit.prepare()?;
    let plan_ms = start.elapsed().as_secs_f64() * 1e3;
    let places = Places::new(&circuit, &prepared)?;
    let costs = measure(&options, &prepared, &places)?;
    let (factor_madds, inverse_madds) = prepared.plan.multiply_adds();
    let mut line = String::from("{");
    write!(
        line,
        "\"name\":\"{}\",\"unknowns\":{},\"points\":{},\"us_per_point\":{:.4},\"plan_ms\":{plan_ms:.3},",
        circuit.name, circuit.unknowns, options.points, costs.job
    )?;
    write!(
        line,
        "\"det_us\":{:.4},\"both_dets_us\":{:.4},\"inverse_us\":{:.4},",
        costs.det, costs.both_dets, costs.inverse
    )?;
    write!(
        line,
        "\"lanes\":{},\"instructions\":\"{}\",\"factor_entries\":{},\"multiply_adds\":[{factor_madds},{inverse_madds}],",
        prepared.plan.lanes(),
        instruction_set(),
        prepared.plan.factor_entries(),
    )?;
    write!(
        line,
        "\"repaired_lanes\":{},\"check\":[{}]}}",
        repaired(&options, &prepared)?,
        checked(&options, &prepared, &places)?
    )?;
    println!("{line}");
    Ok(())
}
