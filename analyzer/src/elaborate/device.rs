//! Small-signal stand-ins: the parts that a `*~ device` mark puts in place of a device card
//! or a subcircuit instance.

use super::flatten::PartSpec;
use super::marks::DeviceMark;
use crate::circuit::{NodeRef, PartKind};

/// A stand-in that cannot be built, in words.
pub(super) type Fault = String;

/// Which terminals a stand-in has.
#[derive(Clone, Copy, PartialEq, Eq)]
enum Family {
    /// drain, gate, source.
    FieldEffect,
    /// collector, base, emitter.
    Bipolar,
}

/// The parts of a stand-in. `nodes` are the card's nodes in card order; `inner` makes a node
/// inside the device, named by its argument.
///
/// Element names: `gm`, `gds`, `cgs`, .. as in the mark; the values are those of the usual
/// hybrid-pi equivalents (Gray and Meyer, *Analysis and Design of Analog Integrated Circuits*,
/// ch. 1, from memory).
pub(super) fn stand_in(
    mark: &DeviceMark,
    nodes: &[NodeRef],
    inner: &mut dyn FnMut(&str) -> NodeRef,
) -> Result<Vec<PartSpec>, Fault> {
    if let Some(data) = &mark.data {
        return Ok(vec![PartSpec::new(
            "data",
            PartKind::NotComputed {
                nodes: nodes.to_vec(),
                reason: format!(
                    "its stand-in is data (`{data}`), which is not computed yet; give gm= and the other small-signal values instead"
                ),
            },
        )]);
    }
    if let Some(tau) = mark
        .value("tau")
        .filter(|tau| *tau < 0.0 || !tau.is_finite())
    {
        return Err(format!("tau= must be a delay of zero or more, not {tau}"));
    }
    let bipolar = ["rpi", "cpi", "cmu", "ro", "rb", "re", "rc"];
    let has_bipolar = bipolar.iter().any(|key| mark.value(key).is_some());
    // `b` alone is no sign: it may be a bulk.
    let pin = |letters: [&str; 2]| {
        let has = |pin: &String| letters.contains(&pin.as_str());
        mark.pins.as_ref().is_some_and(|pins| pins.iter().any(has))
    };
    let family = if pin(["c", "e"]) || (has_bipolar && !pin(["d", "g"])) {
        Family::Bipolar
    } else {
        Family::FieldEffect
    };
    check_keys(mark, family)?;
    let builder = Builder { mark, inner };
    match family {
        Family::Bipolar => builder.bipolar(nodes),
        Family::FieldEffect => builder.field_effect(nodes),
    }
}

/// Keys of the other family have no place in the equivalent: they are no small slip.
fn check_keys(mark: &DeviceMark, family: Family) -> Result<(), Fault> {
    let (own, name): (&[&str], &str) = match family {
        Family::FieldEffect => (
            &[
                "gm", "tau", "gds", "cgs", "cgd", "cds", "ri", "rg", "rd", "rs",
            ],
            "field-effect transistor (pins d, g, s)",
        ),
        Family::Bipolar => (
            &["gm", "tau", "rpi", "cpi", "cmu", "ro", "rb", "re", "rc"],
            "bipolar transistor (pins c, b, e)",
        ),
    };
    match mark
        .values
        .iter()
        .find(|(key, _, _)| !own.contains(&key.as_str()))
    {
        Some((key, _, _)) => Err(format!("`{key}=` has no place in a {name}")),
        None => Ok(()),
    }
}

struct Builder<'a> {
    mark: &'a DeviceMark,
    inner: &'a mut dyn FnMut(&str) -> NodeRef,
}

impl Builder<'_> {
    fn terminals(&self, nodes: &[NodeRef], letters: [&str; 3]) -> Result<[NodeRef; 3], Fault> {
        let default: Vec<String> = letters.iter().map(|l| (*l).to_owned()).collect();
        let pins = self.mark.pins.as_ref().unwrap_or(&default);
        let mut found = [NodeRef::Ground; 3];
        for (slot, letter) in found.iter_mut().zip(letters) {
            let index = pins
                .iter()
                .position(|pin| pin == letter)
                .ok_or_else(|| format!("pins= names no `{letter}`"))?;
            *slot = *nodes.get(index).ok_or_else(|| {
                format!("pins= names more terminals than the card's {}", nodes.len())
            })?;
        }
        Ok(found)
    }

    /// A node behind a series resistance, and the resistor.
    fn behind(
        &mut self,
        key: &'static str,
        node: &str,
        outer: NodeRef,
        parts: &mut Vec<PartSpec>,
    ) -> NodeRef {
        match self.mark.value(key) {
            Some(ohm) if ohm != 0.0 => {
                let inside = (self.inner)(node);
                parts.push(PartSpec::new(
                    key,
                    PartKind::Resistor {
                        nodes: [outer, inside],
                        ohm,
                    },
                ));
                inside
            }
            _ => outer,
        }
    }

    fn capacitor(&self, key: &'static str, nodes: [NodeRef; 2], parts: &mut Vec<PartSpec>) {
        if let Some(farad) = self.mark.value(key) {
            parts.push(PartSpec::new(key, PartKind::Capacitor { nodes, farad }));
        }
    }

    fn resistor(&self, key: &'static str, nodes: [NodeRef; 2], parts: &mut Vec<PartSpec>) {
        if let Some(ohm) = self.mark.value(key) {
            parts.push(PartSpec::new(key, PartKind::Resistor { nodes, ohm }));
        }
    }

    fn transconductance(
        &self,
        nodes: [NodeRef; 2],
        control: [NodeRef; 2],
        parts: &mut Vec<PartSpec>,
    ) -> Result<(), Fault> {
        let siemens = self.mark.value("gm").ok_or("gm= is missing")?;
        parts.push(PartSpec::new(
            "gm",
            PartKind::Vccs {
                nodes,
                control,
                siemens,
                delay_s: self.mark.value("tau").unwrap_or(0.0),
            },
        ));
        Ok(())
    }

    fn field_effect(mut self, nodes: &[NodeRef]) -> Result<Vec<PartSpec>, Fault> {
        let [drain, gate, source] = self.terminals(nodes, ["d", "g", "s"])?;
        let mut parts = Vec::new();
        let d = self.behind("rd", "di", drain, &mut parts);
        let g = self.behind("rg", "gi", gate, &mut parts);
        let s = self.behind("rs", "si", source, &mut parts);
        // The gate capacitance charges through ri; gm is controlled by its voltage.
        let (bottom, has_ri) = match self.mark.value("ri") {
            Some(ohm) if ohm != 0.0 => ((self.inner)("ci"), true),
            _ => (s, false),
        };
        self.capacitor("cgs", [g, bottom], &mut parts);
        if has_ri {
            self.resistor("ri", [bottom, s], &mut parts);
        }
        self.transconductance([d, s], [g, bottom], &mut parts)?;
        if let Some(siemens) = self.mark.value("gds")
            && siemens != 0.0
        {
            let ohm = 1.0 / siemens;
            parts.push(PartSpec::new(
                "gds",
                PartKind::Resistor { nodes: [d, s], ohm },
            ));
        }
        self.capacitor("cgd", [g, d], &mut parts);
        self.capacitor("cds", [d, s], &mut parts);
        Ok(parts)
    }

    fn bipolar(mut self, nodes: &[NodeRef]) -> Result<Vec<PartSpec>, Fault> {
        let [collector, base, emitter] = self.terminals(nodes, ["c", "b", "e"])?;
        let mut parts = Vec::new();
        let c = self.behind("rc", "ci", collector, &mut parts);
        let b = self.behind("rb", "bi", base, &mut parts);
        let e = self.behind("re", "ei", emitter, &mut parts);
        self.resistor("rpi", [b, e], &mut parts);
        self.capacitor("cpi", [b, e], &mut parts);
        self.capacitor("cmu", [b, c], &mut parts);
        self.transconductance([c, e], [b, e], &mut parts)?;
        self.resistor("ro", [c, e], &mut parts);
        Ok(parts)
    }
}
