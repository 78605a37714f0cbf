//! `port-shorted`: a source, tie or ideal rail stands straight at a port.

use crate::elaborate::TerminationFault;
use crate::finding::{Finding, RuleId, Severity};
use crate::rules::{BlockContext, Family, Rule};

/// The rule.
pub static RULE: Rule = Rule {
    id: RuleId("port-shorted"),
    family: Family::Coverage,
    severity: Severity::Error,
    summary: "a source, tie or ideal rail stands straight at a port",
    explanation: EXPLANATION,
    text: None,
    screen: Some(check),
};

const EXPLANATION: &str = "\
## What it does
Reports a port whose node is held by an ideal V source, tie or rail.

## Why it matters
The port impedance is shorted: nothing that is connected outside can be judged.

## Method and source
The topology of the block (common practice: a source drives a port through the port impedance).

## Limits
Only a source straight from the node to ground is seen.

## Example
`port in is shorted by Vin`

## Fix
Name the source as the port (`in=Vin`): the port impedance then stands in series with it.
";

fn check(context: &BlockContext<'_>, out: &mut Vec<Finding>) {
    for fault in &context.block.terminations {
        let TerminationFault::PortShorted { port, span, part } = fault else {
            continue;
        };
        let name = context.part_name(*part).to_owned();
        let message = format!("port `{port}` is shorted by `{name}`");
        let mut found = context
            .finding(&RULE, *span, message)
            .also_maybe(context.part_span(*part), "the short");
        if !name.contains(':') {
            found = found.fix(
                format!("name the source as the port: `{name}`"),
                *span,
                name,
            );
        }
        out.push(found);
    }
}
