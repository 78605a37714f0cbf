//! GNU message lines (`file:line:column: severity: message [rule]`), a line for each block, and
//! the caution that belongs to every verdict.

use super::LintResult;
use super::evidence::evidence;
use super::excerpt::excerpt;
use super::places::Places;
use super::style::{Paint, one_line};
use super::words::{is_good, summary};
use squeg_analyzer::finding::{Finding, Severity};
use squeg_analyzer::host::BlockReport;
use squeg_analyzer::text::Span;

/// What a verdict is worth.
const CAUTION: &str = "verdicts are a linear small-signal screen at the given bias; they do not \
replace large-signal analysis, measurement, radio licensing or the judgement of a qualified engineer";

/// What is shown.
#[derive(Clone, Copy, PartialEq, Eq, Debug)]
pub struct TextOptions {
    /// Colour, netlist lines and markers.
    pub paint: Paint,
    /// What is said of blocks.
    pub blocks: BlockDetail,
}

/// How much is said of each block.
#[derive(Clone, Copy, PartialEq, Eq, Debug)]
pub enum BlockDetail {
    /// Nothing.
    Nothing,
    /// One line.
    Line,
    /// The line and the tables behind the verdict.
    Evidence,
}

/// The whole text of a run; empty when there is nothing to be said.
pub fn render_text(result: &LintResult, places: &Places<'_>, options: TextOptions) -> String {
    let mut out = String::new();
    for finding in &result.findings {
        add_finding(finding, places, options.paint, &mut out);
    }
    if options.blocks == BlockDetail::Nothing {
        return out;
    }
    for block in &result.blocks {
        add_block(block, places, options, &mut out);
    }
    if !result.blocks.is_empty() {
        out.push_str(&options.paint.faint(CAUTION));
        out.push('\n');
    }
    out
}

fn add_finding(finding: &Finding, places: &Places<'_>, paint: Paint, out: &mut String) {
    let line = format!(
        "{} {} {} {}\n",
        paint.strong(&location(places, finding.span)),
        paint.severity(finding.severity, &format!("{}:", finding.severity.as_str())),
        one_line(&finding.message),
        paint.faint(&format!("[{}]", finding.rule.as_str()))
    );
    out.push_str(&line);
    if paint.is_color() {
        let line = places.first_line(finding.span);
        out.push_str(&excerpt(&line, places.place(finding.span)));
    }
}

fn add_block(block: &BlockReport, places: &Places<'_>, options: TextOptions, out: &mut String) {
    let paint = options.paint;
    let verdict = block.verdict.as_str();
    let verdict = if is_good(block.verdict) {
        paint.good(verdict)
    } else {
        paint.severity(Severity::Error, verdict)
    };
    let line = format!(
        "{} block {}: {verdict}; {}\n",
        paint.strong(&location(places, block.span)),
        one_line(&block.name),
        one_line(&summary(block))
    );
    out.push_str(&line);
    if options.blocks == BlockDetail::Evidence {
        for line in evidence(block) {
            out.push_str("    ");
            out.push_str(&one_line(&line));
            out.push('\n');
        }
    }
}

/// `file:line:column:`
fn location(places: &Places<'_>, span: Span) -> String {
    let place = places.place(span);
    format!(
        "{}:{}:{}:",
        one_line(place.file),
        place.start.line,
        place.start.column
    )
}

#[cfg(test)]
mod tests {
    use super::super::samples;
    use super::*;
    use expect_test::{Expect, expect};

    fn check(blocks: BlockDetail, paint: Paint, expected: &Expect) {
        let run = samples::run();
        let text =
            run.with(|result, places| render_text(result, places, TextOptions { paint, blocks }));
        // Escapes as pictures, so that the wanted text can be read.
        expected.assert_eq(&text.replace('\x1b', "\u{241B}"));
    }

    #[test]
    fn findings_only() {
        check(
            BlockDetail::Nothing,
            Paint::Plain,
            &expect![[r#"
            gauge/two stages.cir:4:9: warning: `10M` reads as 10.0 mΩ\u{1b}[2J [milli-or-mega]
            gauge/two stages.cir:5:1: error: natural mode at 1.33 GHz grows with time constant 3.23 ns [unstable-mode]
        "#]],
        );
    }

    #[test]
    fn findings_and_blocks() {
        check(
            BlockDetail::Line,
            Paint::Plain,
            &expect![[r#"
                gauge/two stages.cir:4:9: warning: `10M` reads as 10.0 mΩ\u{1b}[2J [milli-or-mega]
                gauge/two stages.cir:5:1: error: natural mode at 1.33 GHz grows with time constant 3.23 ns [unstable-mode]
                gauge/two stages.cir:2:10: block stage: unstable; 2 growing modes; worst mode at 1.33 GHz grows with time constant 3.23 ns (damping -0.0371), mainly node d and part G2; least mu 0.840 at 650 MHz; sweep from 1.00 kHz to 100 GHz; sight intrinsic; why: rail vdd taken as ideal
                gauge/two stages.cir:3:10: block Ωbox: undetermined; natural modes not counted; sweep from 1.00 kHz to 100 GHz; sight ports-only; why: a card cannot be read (line 4)
                verdicts are a linear small-signal screen at the given bias; they do not replace large-signal analysis, measurement, radio licensing or the judgement of a qualified engineer
            "#]],
        );
    }

    #[test]
    fn evidence_under_each_block() {
        check(
            BlockDetail::Evidence,
            Paint::Plain,
            &expect![[r#"
                gauge/two stages.cir:4:9: warning: `10M` reads as 10.0 mΩ\u{1b}[2J [milli-or-mega]
                gauge/two stages.cir:5:1: error: natural mode at 1.33 GHz grows with time constant 3.23 ns [unstable-mode]
                gauge/two stages.cir:2:10: block stage: unstable; 2 growing modes; worst mode at 1.33 GHz grows with time constant 3.23 ns (damping -0.0371), mainly node d and part G2; least mu 0.840 at 650 MHz; sweep from 1.00 kHz to 100 GHz; sight intrinsic; why: rail vdd taken as ideal
                    system: 14 unknowns
                    natural mode  growth        time constant  damping  nodes              parts
                    1.33 GHz      +3.100e8 1/s  3.23 ns        -0.0371  d 62 %, x1.g 30 %  G2 55 %
                    159 Hz        -5.000e2 1/s  2.00 ms        0.448    b 100 %            -
                    normalized determinant: 2 clockwise encirclements, no growing mode with the sources off, 812 evaluations, certified in every interval
                    driving point  worst conductance     negative                   starts near
                    d              -1.92 mS at 1.31 GHz  from 0.94 GHz to 1.72 GHz  1.33 GHz
                    two-port: least mu 0.840 at 650 MHz, K has no finite value, proviso fails
                gauge/two stages.cir:3:10: block Ωbox: undetermined; natural modes not counted; sweep from 1.00 kHz to 100 GHz; sight ports-only; why: a card cannot be read (line 4)
                    system: 0 unknowns
                    natural modes: none to show
                    normalized determinant: none
                    driving points: none to show
                verdicts are a linear small-signal screen at the given bias; they do not replace large-signal analysis, measurement, radio licensing or the judgement of a qualified engineer
            "#]],
        );
    }

    #[test]
    fn on_a_terminal() {
        check(
            BlockDetail::Line,
            Paint::Color,
            &expect![[r#"
                ␛[1mgauge/two stages.cir:4:9:␛[0m ␛[1;33mwarning:␛[0m `10M` reads as 10.0 mΩ\u{1b}[2J ␛[2m[milli-or-mega]␛[0m
                    RΩ1 a b 10M
                            ^^^
                ␛[1mgauge/two stages.cir:5:1:␛[0m ␛[1;31merror:␛[0m natural mode at 1.33 GHz grows with time constant 3.23 ns ␛[2m[unstable-mode]␛[0m
                    G2 d 0 b 0 20m
                    ^^
                ␛[1mgauge/two stages.cir:2:10:␛[0m block stage: ␛[1;31munstable␛[0m; 2 growing modes; worst mode at 1.33 GHz grows with time constant 3.23 ns (damping -0.0371), mainly node d and part G2; least mu 0.840 at 650 MHz; sweep from 1.00 kHz to 100 GHz; sight intrinsic; why: rail vdd taken as ideal
                ␛[1mgauge/two stages.cir:3:10:␛[0m block Ωbox: ␛[1;31mundetermined␛[0m; natural modes not counted; sweep from 1.00 kHz to 100 GHz; sight ports-only; why: a card cannot be read (line 4)
                ␛[2mverdicts are a linear small-signal screen at the given bias; they do not replace large-signal analysis, measurement, radio licensing or the judgement of a qualified engineer␛[0m
            "#]],
        );
    }

    #[test]
    fn nothing_to_be_said() {
        let run = samples::run();
        let text = run.with(|_, places| {
            let options = TextOptions {
                paint: Paint::Plain,
                blocks: BlockDetail::Line,
            };
            render_text(&LintResult::default(), places, options)
        });
        assert_eq!(text, "");
    }
}
