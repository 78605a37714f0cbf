//! `ideal-bypass`: a bypass capacitor without series resistance or inductance.

use crate::circuit::{NodeRef, PartKind, PartRole};
use crate::finding::{Finding, RuleId, Severity};
use crate::rules::{BlockContext, Family, Rule};
use crate::units::engineering;
use std::collections::HashMap;

/// The rule.
pub static RULE: Rule = Rule {
    id: RuleId("ideal-bypass"),
    family: Family::Coverage,
    severity: Severity::Info,
    summary: "a bypass capacitor without series resistance or inductance",
    explanation: EXPLANATION,
    text: None,
    screen: Some(check),
};

const EXPLANATION: &str = "\
## What it does
Reports a capacitor of 100 pF or more straight from a node to ground, in a block.

## Why it matters
A real bypass has series resistance and inductance (about 0.5 nH and some tens of milliohms, common
practice); an ideal one hides resonances of the supply and ground paths.

## Method and source
The topology of the block: the capacitor's node has more than one other part, so nothing is in series.

## Limits
The value of 100 pF is a rule of thumb.

## Example
`Cb (100 nF) bypasses node vdd ideally: no series resistance or inductance`

## Fix
Put R and L in series, or use a subcircuit that has them.
";

const LEAST_FARAD: f64 = 100e-12;

fn check(context: &BlockContext<'_>, out: &mut Vec<Finding>) {
    let circuit = &context.block.circuit;
    let mut touching: HashMap<NodeRef, usize> = HashMap::new();
    for part in &circuit.parts {
        for node in part.kind.terminals().iter().chain(part.kind.control()) {
            *touching.entry(*node).or_insert(0) += 1;
        }
    }
    let mut told = Vec::new();
    for (id, part) in circuit.numbered_parts() {
        let PartKind::Capacitor { nodes, farad } = &part.kind else {
            continue;
        };
        let hot = match nodes {
            [NodeRef::Ground, hot @ NodeRef::Node(_)]
            | [hot @ NodeRef::Node(_), NodeRef::Ground] => *hot,
            _ => continue,
        };
        let alone = touching.get(&hot).copied().unwrap_or(0) <= 2;
        if *farad < LEAST_FARAD || alone || part.role != PartRole::Card {
            continue;
        }
        let Some(span) = context.part_span(id) else {
            continue;
        };
        if told.contains(&span) {
            continue;
        }
        told.push(span);
        let message = format!(
            "`{}` ({}) bypasses node `{}` ideally: no series resistance or inductance",
            part.name,
            engineering(*farad, "F"),
            circuit.node_name(hot)
        );
        let mut found = context.finding(&RULE, span, message);
        found.node = Some(circuit.node_name(hot).to_owned());
        out.push(found);
    }
}
