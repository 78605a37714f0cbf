//! Runs every case of `tests/cases` whose answer the screen gives, edits included. What the
//! quantities mean and where the answers come from stands in `tests/cases/README.md` and in each
//! case.

use num_complex::Complex64;
use squeg_analyzer::assembly::Switch;
use squeg_analyzer::cancel::Cancel;
use squeg_analyzer::circuit::{Circuit, NodeId, NodeRef, PartId, PartKind};
use squeg_analyzer::elaborate::{FileStore, Include, Limits, elaborate_blocks, gather};
use squeg_analyzer::stability::{
    Modes, Probe, ScreenRequest, Solver, Verdict, active_sources, conductance_ranges, count,
    driving_point_admittance, natural_modes, normalized_determinant, participation, screen,
    startup_crossings,
};
use squeg_analyzer::sweep::frequency_grid;
use squeg_analyzer::syntax::{FileRole, Parse, parse};
use squeg_analyzer::text::FileId;
use std::path::Path;
use std::sync::Arc;
use toml::{Table, Value};

/// Quantities that are checked here; the others of the cases belong to methods that the screen
/// does not have yet, and are counted below so that none is lost.
const CHECKED: [&str; 18] = [
    "verdict",
    "rhp_modes",
    "axis_modes",
    "zero_modes",
    "finite_modes",
    "growth_mode",
    "mode",
    "threshold",
    "y_node",
    "neg_g_bands",
    "startup_crossings",
    "down_crossings_neg_g",
    "ndf",
    "ndf_clockwise",
    "off_network_rhp",
    "participation",
    "box_modes",
    "box_count",
];

#[test]
fn cases_with_known_answers() {
    let folder = Path::new(env!("CARGO_MANIFEST_DIR")).join("../tests/cases");
    let mut files: Vec<_> = std::fs::read_dir(&folder)
        .expect("the folder of cases is there")
        .filter_map(|entry| Some(entry.ok()?.path()))
        .filter(|path| path.extension().is_some_and(|e| e == "toml"))
        .collect();
    files.sort();
    let (mut checked, mut later, mut failures) = (0, 0, Vec::new());
    for path in files {
        let text = std::fs::read_to_string(&path).expect("a case can be read");
        let case: Table = text.parse().expect("a case is TOML");
        let id = case["id"].as_str().unwrap_or("?").to_owned();
        let Some(netlist) = case.get("netlist").and_then(Value::as_str) else {
            continue;
        };
        for expect in case["expect"].as_array().into_iter().flatten() {
            let expect = expect.as_table().expect("an expectation is a table");
            let quantity = expect["quantity"].as_str().unwrap_or("?");
            if !CHECKED.contains(&quantity) {
                later += 1;
                continue;
            }
            checked += 1;
            if let Err(message) = run(netlist, expect, quantity) {
                failures.push(format!("{id} {quantity}: {message}  [{expect:?}]"));
            }
        }
    }
    assert!(
        failures.is_empty(),
        "{} of {checked}:\n{}",
        failures.len(),
        failures.join("\n")
    );
    assert_eq!(
        (checked, later),
        (281, 121),
        "every expectation is accounted for"
    );
}

/// A netlist as a flat circuit.
struct Case {
    circuit: Circuit,
}

struct OneFile(Arc<Parse>);

impl FileStore for OneFile {
    fn file(&self, _: FileId) -> Option<Arc<Parse>> {
        Some(Arc::clone(&self.0))
    }
    fn include(&self, _: FileId, _: &str) -> Include {
        Include::Refused("a case includes nothing".to_owned())
    }
}

impl Case {
    fn new(netlist: &str, edit: Option<&Table>) -> Self {
        let text = edited(netlist, edit);
        let parsed = parse(Arc::from(text.as_str()), FileRole::Included);
        assert_eq!(parsed.errors, [], "{text}");
        let program = gather(&OneFile(Arc::new(parsed)), FileId(0), 64, 100_000);
        let limits = Limits {
            parts: 100_000,
            nesting: 64,
        };
        let elaborated = elaborate_blocks(&program, limits);
        assert!(elaborated.issues.is_empty(), "{:?}", elaborated.issues);
        Self {
            circuit: elaborated.top.circuit,
        }
    }

    fn node(&self, name: &str) -> NodeRef {
        self.circuit.find_node(name).expect("the case has the node")
    }

    fn sources(&self, expect: &Table) -> Vec<PartId> {
        match expect.get("sources").and_then(Value::as_array) {
            Some(names) => names
                .iter()
                .map(|name| {
                    let name = name.as_str().unwrap_or("?");
                    self.circuit
                        .find_part(name)
                        .expect("the case has the source")
                })
                .collect(),
            None => active_sources(&self.circuit, &[]).sources,
        }
    }

    fn solver(&self, off: Vec<PartId>, pairs: &[[NodeRef; 2]]) -> Solver {
        Solver::new(&self.circuit, &Switch::off(off), pairs).expect("the case has a system")
    }

    fn modes(&self) -> Modes {
        let solver = self.solver(Vec::new(), &[]);
        natural_modes(&solver, false, 1500, None, &|| false).expect("the case has modes")
    }

    fn request(&self) -> ScreenRequest<'_> {
        ScreenRequest {
            circuit: &self.circuit,
            claims: Vec::new(),
            judged: None,
            sweep_hz: None,
            default_sweep_hz: [1e3, 1e11],
            states: 1500,
        }
    }
}

/// Modes of the screen within the expectation's box [re0, re1, im0, im1], rad/s; conjugates too.
fn in_box(case: &Case, expect: &Table) -> Vec<Complex64> {
    let edges: Vec<f64> = expect["box"]
        .as_array()
        .into_iter()
        .flatten()
        .filter_map(Value::as_float)
        .collect();
    let screened = screen(&case.request(), &Cancel::new()).expect("nobody stops it");
    let list = screened.modes.map(|modes| modes.list).unwrap_or_default();
    let mut found: Vec<Complex64> = list
        .iter()
        .map(|mode| mode.s_rad_per_s)
        .flat_map(|s| [Some(s), (s.im > 0.0).then(|| s.conj())])
        .flatten()
        .filter(|s| edges[0] <= s.re && s.re <= edges[1] && edges[2] <= s.im && s.im <= edges[3])
        .collect();
    found.sort_by(|a, b| a.im.total_cmp(&b.im));
    found
}

fn modes_in_box(case: &Case, expect: &Table) -> Result<(), String> {
    let want: Vec<Complex64> = expect["value"]
        .as_array()
        .into_iter()
        .flatten()
        .map(complex)
        .collect();
    let found = in_box(case, expect);
    let alike = found.len() == want.len()
        && found
            .iter()
            .zip(&want)
            .all(|(a, b)| close_complex(*a, *b, expect));
    if alike {
        Ok(())
    } else {
        Err(format!("got {found:?}"))
    }
}

/// `del`, `set`, `add` in this order.
fn edited(netlist: &str, edit: Option<&Table>) -> String {
    let empty = Table::new();
    let edit = edit.unwrap_or(&empty);
    let names = |key: &str| -> Vec<String> {
        let list = edit.get(key).and_then(Value::as_array);
        list.into_iter()
            .flatten()
            .filter_map(|v| Some(v.as_str()?.to_owned()))
            .collect()
    };
    let deleted = names("del");
    let mut lines: Vec<String> = Vec::new();
    for line in netlist.lines() {
        let name = line.split_whitespace().next().unwrap_or("");
        if deleted.iter().any(|d| d == name) {
            continue;
        }
        let set = edit.get("set").and_then(Value::as_table);
        match set.and_then(|set| set.get(name)) {
            Some(value) => {
                let value = match value {
                    Value::String(text) => text.clone(),
                    other => other.to_string(),
                };
                lines.push(with_value(line, &value));
            }
            None => lines.push(line.to_owned()),
        }
    }
    lines.extend(names("add"));
    lines.join("\n") + "\n"
}

/// A card with its last field replaced.
fn with_value(line: &str, value: &str) -> String {
    let mut fields: Vec<&str> = line.split_whitespace().collect();
    fields.pop();
    fields.push(value);
    fields.join(" ")
}

fn number(table: &Table, key: &str) -> Option<f64> {
    let value = table.get(key)?;
    value
        .as_float()
        .or_else(|| Some(value.as_integer()? as f64))
}

fn numbers(value: &Value) -> Vec<f64> {
    let one = |v: &Value| v.as_float().or_else(|| Some(v.as_integer()? as f64));
    value
        .as_array()
        .map(|list| list.iter().filter_map(one).collect())
        .unwrap_or_default()
}

fn complex(value: &Value) -> Complex64 {
    let pair = numbers(value);
    Complex64::new(pair[0], pair[1])
}

/// abs(got - want) <= atol + rtol abs(want).
fn close(got: f64, want: f64, expect: &Table) -> bool {
    let rtol = number(expect, "rtol").unwrap_or(1e-6);
    let atol = number(expect, "atol").unwrap_or(0.0);
    (got - want).abs() <= atol + rtol * want.abs()
}

fn close_complex(got: Complex64, want: Complex64, expect: &Table) -> bool {
    let rtol = number(expect, "rtol").unwrap_or(1e-6);
    let atol = number(expect, "atol").unwrap_or(0.0);
    (got - want).norm() <= atol + rtol * want.norm()
}

fn equal<T: PartialEq + std::fmt::Debug>(got: T, want: T) -> Result<(), String> {
    if got == want {
        Ok(())
    } else {
        Err(format!("got {got:?}, want {want:?}"))
    }
}

fn hertz(expect: &Table) -> f64 {
    number(expect, "f_hz").unwrap_or_else(|| {
        number(expect, "omega").unwrap_or(f64::NAN) / (2.0 * std::f64::consts::PI)
    })
}

fn run(netlist: &str, expect: &Table, quantity: &str) -> Result<(), String> {
    let edit = expect.get("edit").and_then(Value::as_table);
    let case = Case::new(netlist, edit);
    let want = &expect["value"];
    let whole = || want.as_integer().unwrap_or(-1) as usize;
    match quantity {
        "verdict" => verdict(&case, want.as_str().unwrap_or("?")),
        "rhp_modes" => {
            equal(case.modes().unstable(), whole())?;
            let solver = case.solver(Vec::new(), &[]);
            let counted = count(&solver, Some(&case.modes()), None, &|| false);
            equal(
                counted.map(|c| c.on_roots).map_err(|f| f.reason),
                Ok(whole()),
            )
        }
        "axis_modes" => equal(case.modes().on_axis(), whole()),
        "zero_modes" => equal(case.modes().at_zero, whole()),
        "finite_modes" => equal(case.modes().finite(), whole()),
        "growth_mode" => {
            let modes = case.modes();
            let first = modes.list.first().map(|m| m.s_rad_per_s);
            match first {
                Some(got) if close_complex(got, complex(want), expect) => Ok(()),
                got => Err(format!("got {got:?}")),
            }
        }
        "mode" => {
            let mut want = complex(want);
            want.im = want.im.abs();
            let modes = case.modes();
            let found = modes
                .list
                .iter()
                .any(|mode| close_complex(mode.s_rad_per_s, want, expect));
            if found {
                Ok(())
            } else {
                Err(format!("modes {:?}", modes.list))
            }
        }
        "box_modes" => modes_in_box(&case, expect),
        "box_count" => equal(in_box(&case, expect).len(), whole()),
        "threshold" => threshold(netlist, expect, edit),
        "y_node" => admittance(&case, expect),
        "neg_g_bands" => bands(&case, expect),
        "startup_crossings" => crossings(&case, expect, true),
        "down_crossings_neg_g" => crossings(&case, expect, false),
        "ndf" => {
            let solver = case.solver(case.sources(expect), &[]);
            let got = normalized_determinant(&solver, &[hertz(expect)]);
            let got = got.map_err(|error| error.to_string())?[0];
            if close_complex(got, complex(want), expect) {
                Ok(())
            } else {
                Err(format!("got {got}"))
            }
        }
        "ndf_clockwise" => {
            let counted = counted(&case, expect)?;
            equal(counted.turns(), want.as_integer())
        }
        "off_network_rhp" => {
            let counted = counted(&case, expect)?;
            equal(counted.off_roots, Some(whole()))?;
            let solver = case.solver(case.sources(expect), &[]);
            let off = natural_modes(&solver, true, 1500, None, &|| false);
            equal(off.map(|m| m.unstable()).ok(), Some(whole()))
        }
        "participation" => shares(&case, expect),
        other => Err(format!("quantity {other} has no check")),
    }
}

fn counted(case: &Case, expect: &Table) -> Result<squeg_analyzer::stability::Determinant, String> {
    let solver = case.solver(case.sources(expect), &[]);
    let on = natural_modes(&solver, false, 1500, None, &|| false).map_err(|e| format!("{e:?}"))?;
    let off = natural_modes(&solver, true, 1500, None, &|| false).ok();
    count(&solver, Some(&on), off.as_ref(), &|| false).map_err(|failure| failure.reason)
}

fn verdict(case: &Case, want: &str) -> Result<(), String> {
    let screen = screen(&case.request(), &Cancel::new()).map_err(|_| "cancelled")?;
    let got = match screen.verdict {
        Verdict::UnconditionallyStable => "stable",
        other => other.as_str(),
    };
    equal(got, want).map_err(|message| format!("{message} ({:?})", screen.doubt))
}

/// The value of an element at which the count of right-half-plane modes changes.
fn threshold(netlist: &str, expect: &Table, edit: Option<&Table>) -> Result<(), String> {
    let element = expect["element"].as_str().unwrap_or("?");
    let bracket = numbers(&expect["bracket"]);
    let ignore = number(expect, "ignore_below").unwrap_or(0.0);
    let tied = expect.get("tied").and_then(Value::as_table);
    let text = edited(netlist, edit);
    let modes_at = |value: f64| -> Modes {
        let mut lines = Vec::new();
        for line in text.lines() {
            let name = line.split_whitespace().next().unwrap_or("");
            let factor = if name == element {
                Some(1.0)
            } else {
                tied.and_then(|tied| number(tied, name))
            };
            lines.push(match factor {
                Some(factor) => with_value(line, &format!("{:e}", value * factor)),
                None => line.to_owned(),
            });
        }
        Case::new(&lines.join("\n"), None).modes()
    };
    let unstable = |modes: &Modes| -> usize {
        modes
            .list
            .iter()
            .filter(|mode| mode.s_rad_per_s.re > 0.0 && mode.s_rad_per_s.norm() >= ignore)
            .map(|mode| mode.count())
            .sum()
    };
    let (mut low, mut high) = (bracket[0], bracket[1]);
    let low_count = unstable(&modes_at(low));
    if unstable(&modes_at(high)) == low_count {
        return Err("the count is the same at both ends".to_owned());
    }
    for _ in 0..60 {
        let middle = if low * high > 0.0 {
            low.signum() * (low * high).sqrt()
        } else {
            0.5 * (low + high)
        };
        if unstable(&modes_at(middle)) == low_count {
            low = middle;
        } else {
            high = middle;
        }
    }
    let want = expect["value"].as_table().ok_or("a table")?;
    let value = number(want, "value").unwrap_or(f64::NAN);
    if !close(high, value, expect) {
        return Err(format!("got {high}, want {value}"));
    }
    if let Some(omega) = number(want, "omega") {
        let modes = modes_at(high);
        let nearest = modes
            .list
            .iter()
            .filter(|mode| mode.s_rad_per_s.norm() >= ignore)
            .min_by(|a, b| a.damping().abs().total_cmp(&b.damping().abs()));
        let got = nearest.map_or(f64::NAN, |mode| mode.s_rad_per_s.im);
        if !close(got, omega, expect) {
            return Err(format!("crosses at {got}, want {omega}"));
        }
    }
    Ok(())
}

fn probe(case: &Case, expect: &Table) -> (Probe, Vec<[NodeRef; 2]>) {
    let node = case.node(expect["node"].as_str().unwrap_or("?"));
    match expect.get("ref").and_then(Value::as_str) {
        Some(name) if name != "0" => {
            let other = case.node(name);
            (Probe::Pair(node, other), vec![[node, other]])
        }
        _ => (
            Probe::Node(node.node().unwrap_or(NodeId(u32::MAX))),
            Vec::new(),
        ),
    }
}

fn admittance(case: &Case, expect: &Table) -> Result<(), String> {
    let (probe, pairs) = probe(case, expect);
    let solver = case.solver(Vec::new(), &pairs);
    let got = driving_point_admittance(&solver, probe, &[hertz(expect)])
        .map_err(|error| error.to_string())?[0];
    let want = complex(&expect["value"]);
    if close_complex(got, want, expect) {
        Ok(())
    } else {
        Err(format!("got {got}, want {want}"))
    }
}

/// A grid over the range, with the modes of the case in it.
fn grid(case: &Case, range: &[f64]) -> Vec<f64> {
    let modes = case.modes();
    let around: Vec<(f64, f64)> = modes.list.iter().map(|m| (m.hz(), m.damping())).collect();
    frequency_grid(range[0], range[1], &around)
}

fn bands(case: &Case, expect: &Table) -> Result<(), String> {
    let range = numbers(&expect["range_hz"]);
    let (probe, pairs) = probe(case, expect);
    let solver = case.solver(Vec::new(), &pairs);
    let got = conductance_ranges(&solver, probe, &grid(case, &range))
        .map_err(|error| error.to_string())?;
    let want: Vec<Vec<f64>> = expect["value"]
        .as_array()
        .into_iter()
        .flatten()
        .map(numbers)
        .collect();
    let same = got.len() == want.len()
        && got.iter().zip(&want).all(|(g, w)| {
            (w[0] == f64::NEG_INFINITY && g[0] == range[0] || close(g[0], w[0], expect))
                && (w[1] == f64::INFINITY && g[1] == range[1] || close(g[1], w[1], expect))
        });
    if same {
        Ok(())
    } else {
        Err(format!("got {got:?}, want {want:?}"))
    }
}

fn crossings(case: &Case, expect: &Table, rising: bool) -> Result<(), String> {
    let range = numbers(&expect["range_hz"]);
    let (probe, pairs) = probe(case, expect);
    let solver = case.solver(Vec::new(), &pairs);
    let got = startup_crossings(&solver, probe, &grid(case, &range), rising)
        .map_err(|error| error.to_string())?;
    let want: Vec<Vec<f64>> = expect["value"]
        .as_array()
        .into_iter()
        .flatten()
        .map(numbers)
        .collect();
    let same = got.len() == want.len()
        && got
            .iter()
            .zip(&want)
            .all(|(g, w)| close(g.hz, w[0], expect) && close(g.siemens, w[1], expect));
    if same {
        Ok(())
    } else {
        Err(format!("got {got:?}, want {want:?}"))
    }
}

fn shares(case: &Case, expect: &Table) -> Result<(), String> {
    let wanted_mode = complex(&expect["mode"]);
    let solver = case.solver(Vec::new(), &[]);
    let modes = case.modes();
    let mode = modes
        .list
        .iter()
        .find(|mode| (mode.s_rad_per_s - wanted_mode).norm() <= 1e-6 * wanted_mode.norm())
        .ok_or("no such mode")?;
    let found = participation(&solver, &case.circuit, std::slice::from_ref(mode))
        .map_err(|error| error.to_string())?;
    let names = expect["nodes"].as_array().ok_or("nodes")?;
    for (name, want) in names.iter().zip(numbers(&expect["value"])) {
        let node = case.node(name.as_str().unwrap_or("?"));
        let index = node.node().map_or(usize::MAX, |n| n.0 as usize);
        let got = found[0].raw_nodes.get(index).copied().unwrap_or(f64::NAN);
        if !close(got, want, expect) {
            return Err(format!("share of {name}: got {got}, want {want}"));
        }
    }
    Ok(())
}

/// A part that a case names as a source is one.
#[test]
fn sources_of_cases_are_controlled_sources() {
    let case = Case::new("G1 a 0 b 0 1m\nR1 a 0 1\nR2 b 0 1\n", None);
    let found = active_sources(&case.circuit, &[]).sources;
    assert_eq!(found.len(), 1);
    let part = case.circuit.part(found[0]).map(|part| &part.kind);
    assert!(matches!(part, Some(PartKind::Vccs { .. })));
}
