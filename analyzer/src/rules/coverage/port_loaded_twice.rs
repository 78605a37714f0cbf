//! `port-loaded-twice`: a resistor near the port impedance stands at the port already.

use crate::circuit::PartKind;
use crate::elaborate::TerminationFault;
use crate::finding::{Finding, RuleId, Severity};
use crate::rules::{BlockContext, Family, Rule};
use crate::units::engineering;

/// The rule.
pub static RULE: Rule = Rule {
    id: RuleId("port-loaded-twice"),
    family: Family::Coverage,
    severity: Severity::Warning,
    summary: "a resistor near the port impedance stands at the port already",
    explanation: EXPLANATION,
    text: None,
    screen: Some(check),
};

const EXPLANATION: &str = "\
## What it does
Reports a port node with a resistor of a third to three times the port impedance to ground.

## Why it matters
The block mark adds its own termination, so the node is loaded twice, which hides instability.

## Method and source
The topology of the block (common practice).

## Limits
Other loads at the port are taken to be part of the circuit.

## Example
`port out is loaded by 50.0 ohm and by RL (50.0 ohm) too`

## Fix
Name the resistor as the port (`out=RL`), or remove it.
";

fn check(context: &BlockContext<'_>, out: &mut Vec<Finding>) {
    for fault in &context.block.terminations {
        let TerminationFault::PortLoadedTwice { port, span, part } = fault else {
            continue;
        };
        let name = context.part_name(*part).to_owned();
        let ohm = match context.block.circuit.part(*part).map(|part| &part.kind) {
            Some(PartKind::Resistor { ohm, .. }) => *ohm,
            _ => continue,
        };
        let message = format!(
            "port `{port}` is loaded by its termination and by `{name}` ({}) too",
            engineering(ohm, "ohm")
        );
        out.push(
            context
                .finding(&RULE, *span, message)
                .also_maybe(context.part_span(*part), "the resistor at the port")
                .fix(
                    format!("name the resistor as the port: `{name}`"),
                    *span,
                    name,
                ),
        );
    }
}
