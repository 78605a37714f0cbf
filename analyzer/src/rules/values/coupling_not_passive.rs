//! `coupling-not-passive`: coupled inductors whose factors cannot all be true.

use super::coupling::{Group, factor_spans, groups};
use crate::finding::{Finding, RuleId, Severity};
use crate::rules::views::{View, name_list, views};
use crate::rules::{Family, Rule, TextContext};
use crate::text::Span;
use std::collections::BTreeSet;

/// The rule.
pub static RULE: Rule = Rule {
    id: RuleId("coupling-not-passive"),
    family: Family::Values,
    severity: Severity::Warning,
    summary: "coupled inductors whose coupling factors cannot all be true",
    explanation: EXPLANATION,
    text: Some(check),
    screen: None,
};

const EXPLANATION: &str = "\
## What it does
Reports a group of coupled inductors whose coupling matrix has a negative eigenvalue, although each factor
is possible by itself.

## Why it matters
For some currents the group stores negative energy: it delivers energy though it is no source, and can
make the network unstable by itself. With three windings two factors of 0.9 ask for a third one
of 0.62 at least; left out, it is 0.

## Method and source
The energy of the group is never negative if and only if the matrix of the factors, with ones on its
diagonal, has no negative eigenvalue (Horn and Johnson, *Matrix Analysis*, 1985, from memory). The
eigenvalues are computed by reduction to tridiagonal form and QR steps (Golub and Van Loan, *Matrix
Computations*, from memory), only where a Cholesky factorization fails. Several `K` cards of one pair add.

## Limits
An eigenvalue of zero (perfect coupling) is fine. A group with a factor above 1 is told by
`coupling-over-unity` alone. Subcircuits that no circuit holds are not looked at. Groups of more
than 300 inductors are not looked at.

## Example
```
K12 L1 L2 0.9
K23 L2 L3 0.9
```

## Fix
Add the coupling that is missing (`K13 L1 L3 0.8`), or lower the others.
";

fn check(context: &TextContext<'_>, out: &mut Vec<Finding>) {
    // Instances of one subcircuit show the same group again.
    let mut seen: BTreeSet<Vec<(Span, [usize; 2], u64)>> = BTreeSet::new();
    let mut told: BTreeSet<Span> = BTreeSet::new();
    for view in views(context) {
        for group in groups(view.circuit) {
            if group.has_factor_over_unity() || !seen.insert(fingerprint(&view, &group)) {
                continue;
            }
            let Some(eigenvalue) = group.negative_eigenvalue() else {
                continue;
            };
            let mut places = places(&view, &group);
            if let Some((place, _)) = places.pop()
                && told.insert(place)
            {
                let finding = finding(&view, &group, eigenvalue, place);
                out.push(places.iter().fold(finding, |finding, (place, name)| {
                    let message = format!("`{}` is in the group", context.text(*name));
                    finding.also(*place, message)
                }));
            }
        }
    }
}

/// What tells one group of cards from another: each factor, its place and its pair.
fn fingerprint(view: &View<'_>, group: &Group) -> Vec<(Span, [usize; 2], u64)> {
    let couplings = group.couplings.iter();
    couplings
        .filter_map(|(id, pair, factor)| {
            let (place, _) = factor_spans(view, *id)?;
            Some((place, *pair, factor.to_bits()))
        })
        .collect()
}

/// Places of factor and name of each K card of a group, in order of the text, each once.
fn places(view: &View<'_>, group: &Group) -> Vec<(Span, Span)> {
    let couplings = group.couplings.iter();
    let places: BTreeSet<(Span, Span)> = couplings
        .filter_map(|(id, _, _)| factor_spans(view, *id))
        .collect();
    places.into_iter().collect()
}

fn finding(view: &View<'_>, group: &Group, eigenvalue: f64, place: Span) -> Finding {
    let inductors = name_list(group.inductors.iter().map(|id| view.part_name(*id)), 6);
    let message = format!(
        "smallest eigenvalue {eigenvalue:.3} of the coupling matrix of {inductors}: below 0 the coupling is not passive"
    );
    let mut finding = RULE.finding(place, message);
    finding.values.push(("eigenvalue", eigenvalue));
    view.place(finding)
}

#[cfg(test)]
mod tests {
    use crate::rules::testing::{check, findings};

    const THREE: &str = "title\nL1 a 0 1n\nL2 b 0 4n\nL3 c 0 9n\nR1 a b 1k\nR2 b c 1k\n";

    #[test]
    fn triggers() {
        check(
            "\
title
L1 a 0 1n
L2 b 0 4n
L3 c 0 9n
K12 L1 L2 0.9
K23 L2 L3 0.9
          ^^^ coupling-not-passive
R1 a b 1k
R2 b c 1k
",
        );
        check(
            "\
title
X1 a b c trio k=0.6
X2 a b c trio k=0.4
X3 a b c trio k=0.6
R1 a b 1k
R2 b c 1k
.subckt trio a b c k=0.1
L1 a 0 1n
L2 b 0 4n
L3 c 0 9n
K1 L1 L2 L3 '-k'
            ^^^^ coupling-not-passive
.ends
",
        );
        check(
            "\
title
L1 a 0 1n
L2 b 0 4n
K1 L1 L2 0.6
K2 L2 L1 0.6
         ^^^ coupling-not-passive
R1 a b 1k
",
        );
    }

    /// Closed form: [[1,p,0],[p,1,q],[0,q,1]] has the eigenvalues 1 and 1 -+ sqrt(p^2 + q^2).
    #[test]
    fn the_eigenvalue_is_that_of_the_closed_form() {
        let text = format!("{THREE}K12 L1 L2 0.62\nK23 L2 L3 -0.9\n");
        let found = findings(&text, "coupling-not-passive");
        assert_eq!(found.len(), 1);
        let wanted = 1.0 - (0.62f64 * 0.62 + 0.9 * 0.9).sqrt();
        let (_, eigenvalue) = found[0].values[0];
        assert!((eigenvalue - wanted).abs() < 1e-14, "{eigenvalue} {wanted}");
        assert_eq!(
            found[0].message,
            "smallest eigenvalue -0.093 of the coupling matrix of `L1`, `L2` and `L3`: below 0 the coupling is not passive"
        );
        assert_eq!(found[0].related.len(), 1);
    }

    #[test]
    fn near_misses() {
        check(&format!(
            "{THREE}K12 L1 L2 0.9\nK23 L2 L3 0.9\nK13 L1 L3 0.63\n"
        ));
        // 0.6^2 + 0.8^2 = 1: the smallest eigenvalue is zero.
        check(&format!("{THREE}K12 L1 L2 0.6\nK23 L2 L3 0.8\n"));
        check(&format!("{THREE}K1 L1 L2 L3 1\n"));
        // Equal factors -k of three: the smallest eigenvalue is 1 - 2 k.
        check(&format!("{THREE}K1 L1 L2 L3 -0.5\n"));
    }

    #[test]
    fn a_factor_above_one_is_the_one_cause() {
        check(&format!(
            "{THREE}\
K12 L1 L2 1.02
          ^^^^ coupling-over-unity
K23 L2 L3 0.9
"
        ));
    }
}
