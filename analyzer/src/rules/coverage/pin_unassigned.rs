//! `pin-unassigned`: a pin of a subcircuit block that nothing is said about.

use crate::elaborate::TerminationFault;
use crate::finding::{Finding, RuleId, Severity};
use crate::rules::{BlockContext, Family, Rule};

/// The rule.
pub static RULE: Rule = Rule {
    id: RuleId("pin-unassigned"),
    family: Family::Coverage,
    severity: Severity::Info,
    summary: "a pin of a subcircuit block that nothing is said about",
    explanation: EXPLANATION,
    text: None,
    screen: Some(check),
};

const EXPLANATION: &str = "\
## What it does
Reports a pin of a block in a subcircuit that is no port, rail, tie or ground.

## Why it matters
What is connected there outside is not known, so the pin is left open and the block is undetermined.

## Method and source
A block inside a subcircuit is judged alone; every pin needs a termination.

## Limits
None.

## Example
`pin vdd is neither port, rail nor tied`

## Fix
`*~ rail vdd volts=3.3`, `*~ tie vdd to=ground`, or name the pin as a port.
";

fn check(context: &BlockContext<'_>, out: &mut Vec<Finding>) {
    for fault in &context.block.terminations {
        if let TerminationFault::PinUnassigned { pin, span } = fault {
            let message = format!("pin `{pin}` is neither port, rail nor tied");
            out.push(context.finding(&RULE, *span, message).also(
                context.block.span,
                format!("block `{}`", context.block.name),
            ));
        }
    }
}
