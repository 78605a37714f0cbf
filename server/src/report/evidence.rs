//! What stands behind a verdict, as lines of text: natural modes, determinant, driving points,
//! two-port factors.

use super::words::{constant, figure};
use squeg_analyzer::host::{
    BlockReport, DeterminantReport, DrivingPointReport, ModeReport, Share, TwoPortReport, Verdict,
};
use squeg_analyzer::units::{engineering, hertz, hertz_range, percent};

/// Shares shown of each mode; the JSON has all.
const SHARES: usize = 3;

/// The lines, without indent.
pub fn evidence(block: &BlockReport) -> Vec<String> {
    let mut lines = vec![format!("system: {} unknowns", block.unknowns)];
    lines.extend(modes(&block.modes));
    lines.push(determinant(&block.determinant));
    lines.extend(driving_points(block));
    lines.extend(block.two_port.as_ref().map(two_port));
    lines
}

fn modes(modes: &[ModeReport]) -> Vec<String> {
    if modes.is_empty() {
        return vec!["natural modes: none to show".to_owned()];
    }
    let mut rows = vec![row(&[
        "natural mode",
        "growth",
        "time constant",
        "damping",
        "nodes",
        "parts",
    ])];
    for mode in modes {
        rows.push(vec![
            hertz(mode.hz),
            format!("{:+.3e} 1/s", mode.growth_per_s),
            constant(mode),
            figure(mode.damping),
            shares(&mode.nodes),
            shares(&mode.parts),
        ]);
    }
    aligned(&rows)
}

fn shares(shares: &[Share]) -> String {
    let shown = shares
        .iter()
        .take(SHARES)
        .map(|share| format!("{} {}", share.name, percent(share.share)));
    let text = shown.collect::<Vec<_>>().join(", ");
    if text.is_empty() {
        "-".to_owned()
    } else {
        text
    }
}

fn determinant(report: &DeterminantReport) -> String {
    let turns = match report.encirclements {
        None if report.evaluations == 0 => return "normalized determinant: none".to_owned(),
        None => "encirclements not counted".to_owned(),
        Some(1) => "1 clockwise encirclement".to_owned(),
        Some(count) => format!("{count} clockwise encirclements"),
    };
    let off = match report.off_network_unstable {
        None => "growing modes with the sources off not counted".to_owned(),
        Some(1) => "1 growing mode with the sources off".to_owned(),
        Some(0) => "no growing mode with the sources off".to_owned(),
        Some(count) => format!("{count} growing modes with the sources off"),
    };
    let proof = match (report.certified, report.failed_hz) {
        (_, Some([low, high])) => format!("not certified {}", hertz_range(low, high)),
        (Some(true), None) => "certified in every interval".to_owned(),
        (Some(false), None) => "not certified".to_owned(),
        (None, None) => "certification does not apply".to_owned(),
    };
    format!(
        "normalized determinant: {turns}, {off}, {} evaluations, {proof}",
        report.evaluations
    )
}

fn driving_points(block: &BlockReport) -> Vec<String> {
    let points: &[DrivingPointReport] = &block.driving_point;
    if points.is_empty() {
        // Of a block about which nothing can be said, an empty list proves nothing.
        let text = match block.verdict {
            Verdict::Undetermined => "driving points: none to show",
            _ => "driving points: conductance negative at no node",
        };
        return vec![text.to_owned()];
    }
    let mut rows = vec![row(&[
        "driving point",
        "worst conductance",
        "negative",
        "starts near",
    ])];
    for point in points {
        let ranges = point
            .ranges_hz
            .iter()
            .map(|[low, high]| hertz_range(*low, *high));
        rows.push(vec![
            point.node.clone(),
            format!(
                "{} at {}",
                engineering(point.worst_siemens, "S"),
                hertz(point.worst_hz)
            ),
            list(ranges),
            list(point.startup_hz.iter().map(|hz| hertz(*hz))),
        ]);
    }
    aligned(&rows)
}

fn list(items: impl Iterator<Item = String>) -> String {
    let text = items.collect::<Vec<_>>().join(", ");
    if text.is_empty() {
        "-".to_owned()
    } else {
        text
    }
}

fn two_port(report: &TwoPortReport) -> String {
    let k = match (report.k_min, report.k_min_hz) {
        (Some(k), Some(hz)) => format!("least K {} at {}", figure(k), hertz(hz)),
        (Some(k), None) => format!("least K {}", figure(k)),
        (None, _) => "K has no finite value".to_owned(),
    };
    let unilateral = if report.unilateral {
        ", unilateral"
    } else {
        ""
    };
    let proviso = match report.proviso {
        Some(true) => "proviso holds",
        Some(false) => "proviso fails",
        None => "proviso not known",
    };
    format!(
        "two-port: least mu {} at {}, {k}{unilateral}, {proviso}",
        figure(report.mu_min),
        hertz(report.mu_min_hz)
    )
}

fn row(cells: &[&str]) -> Vec<String> {
    cells.iter().map(|cell| (*cell).to_owned()).collect()
}

/// Columns two blanks apart.
fn aligned(rows: &[Vec<String>]) -> Vec<String> {
    let columns = rows.iter().map(Vec::len).max().unwrap_or(0);
    let width = |column: usize| {
        let cells = rows.iter().filter_map(|row| row.get(column));
        cells.map(|cell| cell.chars().count()).max().unwrap_or(0)
    };
    let widths: Vec<usize> = (0..columns).map(width).collect();
    let line = |row: &Vec<String>| {
        let cells = row.iter().zip(&widths);
        let padded: Vec<String> = cells
            .map(|(cell, width)| format!("{cell:width$}"))
            .collect();
        padded.join("  ").trim_end().to_owned()
    };
    rows.iter().map(line).collect()
}
