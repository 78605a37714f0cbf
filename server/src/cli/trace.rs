//! `squeg trace`: figures of a block over frequency, as CSV or JSON.

use super::args::{Args, TraceArgs, TraceFormat};
use super::trace_source::{TraceTable, trace};
use super::{Exit, deliver, deliver_json, fail, usage};
use crate::io::read_stdin;
use crate::session::Session;
use clap::CommandFactory;
use clap::error::ErrorKind;
use serde::Serialize;
use squeg_analyzer::text::FileId;
use squeg_analyzer::units::{hertz, parse_number};
use std::path::Path;

/// Bound on the frequencies of one run, so that a slip of the finger cannot fill the memory.
const MOST_POINTS: usize = 1_000_000;

/// Runs the command.
pub fn run(args: &TraceArgs) -> Exit {
    let hz = match frequencies(args) {
        Ok(hz) => hz,
        Err(message) => {
            return usage(&Args::command().error(ErrorKind::ValueValidation, message));
        }
    };
    let mut session = Session::new();
    let root = match add(&mut session, &args.file) {
        Ok(root) => root,
        Err(reason) => return fail(&format!("{}: {reason}", args.file.display())),
    };
    session.load_includes(root);
    let prepared = session.host().prepare(root);
    match trace(&prepared, args.block.as_deref(), &args.quantities, &hz) {
        Ok(table) => write(args, session.name(root), &table),
        Err(error) => fail(&format!("{}: {error}", args.file.display())),
    }
}

fn add(session: &mut Session, path: &Path) -> Result<FileId, String> {
    if path.as_os_str() == "-" {
        let limit = session.host().config.limits.file_bytes;
        let source = read_stdin(limit).map_err(|fault| fault.to_string())?;
        return Ok(session.add_root_text(Path::new("<stdin>"), source));
    }
    session.add_root(path).map_err(|fault| fault.to_string())
}

/// The frequencies asked for, hertz, in order. None is needed for what has no frequency axis.
fn frequencies(args: &TraceArgs) -> Result<Vec<f64>, String> {
    if let (Some(from), Some(to), Some(points)) = (&args.from, &args.to, args.points) {
        return spaced(frequency(from)?, frequency(to)?, points);
    }
    let without_axis = |quantity: &String| {
        let name = quantity.to_ascii_lowercase();
        name == "modes" || name == "bias"
    };
    if args.at.is_empty() && !args.quantities.iter().all(without_axis) {
        return Err("frequencies are needed: --at, or --from, --to and --points".to_owned());
    }
    args.at.iter().map(|text| frequency(text)).collect()
}

/// A netlist number that is a frequency.
fn frequency(text: &str) -> Result<f64, String> {
    let number = parse_number(text.trim())
        .map_err(|_| format!("`{text}` is not a frequency, such as 2.4g, 10meg or 1e9"))?;
    if number.value < 0.0 {
        return Err(format!("the frequency `{text}` is negative"));
    }
    let scale = number
        .scale_at
        .and_then(|at| text.trim().get(at as usize..));
    if scale.is_some_and(reads_as_milli) {
        let value = hertz(number.value);
        log::warn!("`{text}` reads as {value}; `M` is milli, mega is written `meg`");
    }
    Ok(number.value)
}

/// Whether a scale factor is an upper-case `M` that stands for milli.
fn reads_as_milli(scale: &str) -> bool {
    let word = scale.get(..3).unwrap_or("").to_ascii_lowercase();
    scale.starts_with('M') && word != "meg" && word != "mil"
}

/// Evenly spaced on a logarithmic axis; both ends are met exactly.
fn spaced(from_hz: f64, to_hz: f64, points: usize) -> Result<Vec<f64>, String> {
    if from_hz <= 0.0 || to_hz < from_hz {
        return Err("--from must be above zero and not above --to".to_owned());
    }
    if points > MOST_POINTS {
        return Err(format!("--points is at most {MOST_POINTS}"));
    }
    if points < 2 && (points == 0 || from_hz < to_hz) {
        return Err("--points is at least 2, so that both ends are met".to_owned());
    }
    let (low, high) = (from_hz.log10(), to_hz.log10());
    let inner = |index: usize| {
        let part = index as f64 / (points - 1) as f64;
        10f64.powf(low + (high - low) * part).clamp(from_hz, to_hz)
    };
    let at = |index: usize| match index {
        0 => from_hz,
        last if last + 1 == points => to_hz,
        index => inner(index),
    };
    Ok((0..points).map(at).collect())
}

#[derive(Serialize)]
struct Document<'a> {
    schema: &'static str,
    version: &'static str,
    file: &'a str,
    block: Option<&'a str>,
    header: &'a [String],
    rows: &'a [Vec<f64>],
}

fn write(args: &TraceArgs, file: &str, table: &TraceTable) -> Exit {
    match args.format {
        TraceFormat::Csv => deliver(csv(table).as_bytes(), Exit::Clean),
        TraceFormat::Json => {
            let document = Document {
                schema: "squeg-trace-1",
                version: env!("CARGO_PKG_VERSION"),
                file,
                block: args.block.as_deref(),
                header: &table.header,
                rows: &table.rows,
            };
            deliver_json(&document, Exit::Clean)
        }
    }
}

/// CSV by RFC 4180, with LF.
fn csv(table: &TraceTable) -> String {
    let header: Vec<String> = table.header.iter().map(|name| field(name)).collect();
    let mut out = header.join(",");
    out.push('\n');
    for row in &table.rows {
        let cells: Vec<String> = row.iter().copied().map(number).collect();
        out.push_str(&cells.join(","));
        out.push('\n');
    }
    out
}

/// A name, in quotes where the format asks for them.
fn field(text: &str) -> String {
    if text.contains(['"', ',', '\n', '\r']) {
        format!("\"{}\"", text.replace('"', "\"\""))
    } else {
        text.to_owned()
    }
}

/// The shortest number that reads back as the same double.
fn number(value: f64) -> String {
    let magnitude = value.abs();
    if value.is_nan() {
        "nan".to_owned()
    } else if value == 0.0 || value.is_infinite() || (1e-5..1e16).contains(&magnitude) {
        format!("{value}")
    } else {
        format!("{value:e}")
    }
}

#[cfg(test)]
mod tests {
    use super::*;

    #[test]
    fn numbers_are_short_and_read_back() {
        for (value, text) in [
            (0.1 + 0.2, "0.30000000000000004"),
            (2.4e9, "2400000000"),
            (1e300, "1e300"),
            (-1.92e-12, "-1.92e-12"),
            (0.0, "0"),
            (f64::NAN, "nan"),
            (f64::INFINITY, "inf"),
            (f64::NEG_INFINITY, "-inf"),
        ] {
            assert_eq!(number(value), text);
            assert!(
                value.is_nan() || number(value).parse() == Ok(value),
                "{value:e} reads back"
            );
        }
    }

    #[test]
    fn quotes_by_rfc_4180() {
        let table = TraceTable {
            header: ["hz", "y:a,b_re", "y:\"q\"_re"].map(str::to_owned).to_vec(),
            rows: vec![vec![1e3, -0.5, f64::NAN]],
        };
        let expected = "hz,\"y:a,b_re\",\"y:\"\"q\"\"_re\"\n1000,-0.5,nan\n";
        assert_eq!(csv(&table), expected);
    }

    #[test]
    fn spacing_is_logarithmic_and_meets_both_ends() {
        let decades = spaced(1e3, 1e6, 4);
        assert_eq!(decades, Ok(vec![1e3, 1e4, 1e5, 1e6]));
        let odd = spaced(3.3e3, 7.1e9, 101).unwrap_or_default();
        assert_eq!((odd.first(), odd.last()), (Some(&3.3e3), Some(&7.1e9)));
        let ratio = (7.1e9f64 / 3.3e3).powf(0.01);
        for pair in odd.windows(2) {
            if let [low, high] = pair {
                assert!((high / low / ratio - 1.0).abs() < 1e-12, "{low} {high}");
            }
        }
        assert_eq!(spaced(5.0, 5.0, 1), Ok(vec![5.0]));
        assert!(spaced(0.0, 5.0, 3).is_err(), "no logarithm of zero");
        assert!(spaced(6.0, 5.0, 3).is_err(), "reversed");
        assert!(spaced(1.0, 5.0, 1).is_err(), "one point cannot meet both");
        assert!(spaced(1.0, 5.0, usize::MAX).is_err(), "too many");
    }

    #[test]
    fn frequencies_are_netlist_numbers() {
        assert_eq!(frequency("2.4g"), Ok(2.4e9));
        assert_eq!(frequency("1meg"), Ok(1e6));
        assert_eq!(frequency("1M"), Ok(1e-3));
        assert!(frequency("-1").is_err(), "negative");
        assert!(frequency("fast").is_err(), "no number");
        assert!(reads_as_milli("MHz") && !reads_as_milli("MEG"), "case of M");
    }
}
