//! Marks with their meaning: the word, its keys, and values of the right kind. A mark that
//! cannot be read is reported; the rest of the line is still used.

use super::issue::{Issue, IssueKind};
use super::names::nearest;
use super::params::Env;
use super::program::{CardRef, Program};
use crate::syntax::{Mark, Param, StatementKind, Word};
use crate::text::{Span, TextRange};
use crate::units::parse_number;
use std::rc::Rc;

/// A mark with its place.
#[derive(Clone, PartialEq, Debug)]
pub struct MarkUse {
    /// Where the mark's word stands.
    pub span: Span,
    /// The statement, to find what stands near it.
    pub card: CardRef,
    /// What it says.
    pub data: MarkData,
}

/// What a mark says.
#[derive(Clone, PartialEq, Debug)]
#[non_exhaustive]
pub enum MarkData {
    /// `*~ block`
    Block(BlockMark),
    /// `*~ rail`
    Rail(RailMark),
    /// `*~ tie`
    Tie(TieMark),
    /// `*~ passive`: the sources claimed to model passive parts.
    Passive(Vec<PinTie>),
    /// `*~ device`
    Device(DeviceMark),
    /// `*~ quiet`
    Quiet(QuietMark),
    /// A mark that is read and has no effect on the linear screen yet.
    Recorded(&'static str),
}

/// A name in a mark and its place.
#[derive(Clone, PartialEq, Eq, Debug)]
pub struct PinTie {
    /// As written.
    pub name: String,
    /// Where.
    pub span: Span,
}

/// A port as written: a name and perhaps ohms.
#[derive(Clone, PartialEq, Debug)]
pub struct PortWord {
    /// Node or part.
    pub name: PinTie,
    /// `:ohms`.
    pub ohm: Option<f64>,
}

/// `*~ block NAME ..`
#[derive(Clone, PartialEq, Debug)]
pub struct BlockMark {
    /// The block's name.
    pub name: String,
    /// Where the name stands.
    pub span: Span,
    /// `in`, `out`, then `ports`.
    pub ports: Vec<PortWord>,
    /// Reference impedance of ports without their own, ohms.
    pub z0_ohm: f64,
    /// `band=`, Hz.
    pub band_hz: Option<[f64; 2]>,
    /// `sweep=`, Hz.
    pub sweep_hz: Option<[f64; 2]>,
    /// `of=`: the instance that is judged.
    pub of: Option<PinTie>,
}

/// `*~ rail NODE ..`
#[derive(Clone, PartialEq, Debug)]
pub struct RailMark {
    /// The node.
    pub node: PinTie,
    /// Series resistance, ohms.
    pub ohm: f64,
    /// Series inductance, henries.
    pub henry: f64,
    /// Whether R or L is given.
    pub has_impedance: bool,
}

/// How a pin is tied.
#[derive(Clone, Copy, PartialEq, Debug)]
pub enum TieTo {
    /// To ground.
    Ground,
    /// Left open on purpose.
    Open,
    /// Through a resistor to ground, ohms.
    Resistor(f64),
}

/// `*~ tie NODE to=..`
#[derive(Clone, PartialEq, Debug)]
pub struct TieMark {
    /// The node.
    pub node: PinTie,
    /// What it is tied to.
    pub to: TieTo,
}

/// `*~ device REF ..`
#[derive(Clone, PartialEq, Debug)]
pub struct DeviceMark {
    /// The device card or instance.
    pub target: PinTie,
    /// Terminal letters in card order, lower case.
    pub pins: Option<Vec<String>>,
    /// Values by key, lower case.
    pub values: Vec<(String, f64, Span)>,
    /// `data=`.
    pub data: Option<String>,
}

impl DeviceMark {
    /// A value by key.
    pub fn value(&self, key: &str) -> Option<f64> {
        self.values
            .iter()
            .find(|(name, _, _)| name == key)
            .map(|(_, value, _)| *value)
    }
}

/// `*~ quiet RULE .. why=".."`
#[derive(Clone, PartialEq, Debug)]
pub struct QuietMark {
    /// Rules by name.
    pub rules: Vec<PinTie>,
    /// `on=`.
    pub on: Option<String>,
    /// `why=`.
    pub why: Option<String>,
}

/// What the value of a key must be.
#[derive(Clone, Copy, PartialEq, Eq)]
enum KeyKind {
    Number,
    Range,
    Text,
}

/// The keys of a mark.
type Keys = &'static [(&'static str, KeyKind)];

const BLOCK: &[(&str, KeyKind)] = &[
    ("in", KeyKind::Text),
    ("out", KeyKind::Text),
    ("ports", KeyKind::Text),
    ("z0", KeyKind::Number),
    ("band", KeyKind::Range),
    ("sweep", KeyKind::Range),
    ("of", KeyKind::Text),
];
const RAIL: &[(&str, KeyKind)] = &[
    ("volts", KeyKind::Number),
    ("ohms", KeyKind::Number),
    ("henries", KeyKind::Number),
];
const DEVICE: &[(&str, KeyKind)] = &[
    ("pins", KeyKind::Text),
    ("data", KeyKind::Text),
    ("common", KeyKind::Text),
    ("gm", KeyKind::Number),
    ("gds", KeyKind::Number),
    ("cgs", KeyKind::Number),
    ("cgd", KeyKind::Number),
    ("cds", KeyKind::Number),
    ("ri", KeyKind::Number),
    ("tau", KeyKind::Number),
    ("rg", KeyKind::Number),
    ("rd", KeyKind::Number),
    ("rs", KeyKind::Number),
    ("rpi", KeyKind::Number),
    ("cpi", KeyKind::Number),
    ("cmu", KeyKind::Number),
    ("ro", KeyKind::Number),
    ("rb", KeyKind::Number),
    ("re", KeyKind::Number),
    ("rc", KeyKind::Number),
];
const LOADS: &[(&str, KeyKind)] = &[("in", KeyKind::Text), ("out", KeyKind::Text)];
const MARGINS: &[(&str, KeyKind)] = &[
    ("gain", KeyKind::Number),
    ("phase", KeyKind::Number),
    ("damping", KeyKind::Number),
    ("mu", KeyKind::Number),
];
const QUIET: &[(&str, KeyKind)] = &[("on", KeyKind::Text), ("why", KeyKind::Text)];
const TIE: &[(&str, KeyKind)] = &[("to", KeyKind::Text)];
const LOOP: &[(&str, KeyKind)] = &[("at", KeyKind::Text)];

/// The mark words and their keys; `None`: any key is allowed (the keys are names of parts).
const WORDS: &[(&str, Option<Keys>)] = &[
    ("block", Some(BLOCK)),
    ("rail", Some(RAIL)),
    ("tie", Some(TIE)),
    ("passive", Some(&[])),
    ("device", Some(DEVICE)),
    ("bias", None),
    ("start", None),
    ("bias-sweep", None),
    ("limits", None),
    ("loop", Some(LOOP)),
    ("margins", Some(MARGINS)),
    ("loads", Some(LOADS)),
    ("spread", None),
    ("quiet", Some(QUIET)),
];

/// Reads one mark; what is wrong goes to `issues`.
pub(super) fn read_mark(
    program: &Program,
    card: CardRef,
    env: &Rc<Env>,
    issues: &mut Vec<Issue>,
) -> Option<MarkUse> {
    let parse = program.file(card.file)?;
    let statement = parse.statements.get(card.statement as usize)?;
    let StatementKind::Mark(mark) = &statement.kind else {
        return None;
    };
    let mut reader = MarkReader {
        program,
        card,
        mark,
        extent: statement.range,
        env,
        issues,
    };
    reader.read()
}

pub(super) struct MarkReader<'a> {
    program: &'a Program,
    card: CardRef,
    pub(super) mark: &'a Mark,
    extent: TextRange,
    env: &'a Rc<Env>,
    issues: &'a mut Vec<Issue>,
}

impl MarkReader<'_> {
    pub(super) fn text(&self, range: TextRange) -> String {
        self.program.text(self.card.file, range).to_owned()
    }

    fn span(&self, range: TextRange) -> Span {
        Span::new(self.card.file, range)
    }

    fn word(&self, word: Word) -> PinTie {
        PinTie {
            name: self.text(word.range),
            span: self.span(word.range),
        }
    }

    pub(super) fn bad(&mut self, range: TextRange, message: String, nearest: Option<&str>) {
        let kind = IssueKind::BadMark {
            message,
            nearest: nearest.map(str::to_owned),
        };
        let span = self.span(range);
        self.issues.push(Issue {
            kind,
            span,
            other: None,
        });
    }

    fn read(&mut self) -> Option<MarkUse> {
        if self.mark.word.range.is_empty() {
            let key = self.mark.params.first().map(|param| param.key.range);
            let place = key.unwrap_or(self.extent);
            let message = "a mark starts with its word, such as `block`".to_owned();
            self.bad(place, message, None);
            return None;
        }
        let word = self.text(self.mark.word.range).to_ascii_lowercase();
        let Some((_, keys)) = WORDS.iter().find(|(name, _)| *name == word) else {
            let near = nearest(&word, WORDS.iter().map(|(name, _)| *name));
            self.bad(self.mark.word.range, format!("no mark `{word}`"), near);
            return None;
        };
        if let Some(keys) = keys {
            self.check_keys(&word, keys);
        }
        self.check_repeats();
        self.check_words(&word);
        self.check_recorded(&word);
        let data = match word.as_str() {
            "block" => MarkData::Block(self.block()?),
            "rail" => MarkData::Rail(self.rail()?),
            "tie" => MarkData::Tie(self.tie()?),
            "passive" => MarkData::Passive(self.names()?),
            "device" => MarkData::Device(self.device()?),
            "quiet" => MarkData::Quiet(self.quiet()?),
            "bias" => MarkData::Recorded("bias"),
            "start" => MarkData::Recorded("start"),
            "bias-sweep" => MarkData::Recorded("bias-sweep"),
            "limits" => MarkData::Recorded("limits"),
            "loop" => MarkData::Recorded("loop"),
            "margins" => MarkData::Recorded("margins"),
            "loads" => MarkData::Recorded("loads"),
            _ => MarkData::Recorded("spread"),
        };
        Some(MarkUse {
            span: self.span(self.mark.word.range),
            card: self.card,
            data,
        })
    }

    fn check_keys(&mut self, word: &str, keys: &[(&str, KeyKind)]) {
        for param in &self.mark.params {
            let key = self.text(param.key.range).to_ascii_lowercase();
            match keys.iter().find(|(name, _)| *name == key) {
                Some((_, KeyKind::Range)) => {
                    if self.range_of(param).is_none() {
                        let message = format!("`{key}=` takes LO..HI, two rising frequencies");
                        self.bad(param.value.range, message, None);
                    }
                }
                Some(_) => {}
                None => {
                    let near = nearest(&key, keys.iter().map(|(name, _)| *name));
                    self.bad(
                        param.key.range,
                        format!("`{word}` has no key `{key}`"),
                        near,
                    );
                }
            }
        }
    }

    pub(super) fn param(&self, key: &str) -> Option<Param> {
        self.mark
            .params
            .iter()
            .find(|param| {
                self.program
                    .text(self.card.file, param.key.range)
                    .eq_ignore_ascii_case(key)
            })
            .copied()
    }

    fn number(&mut self, key: &str) -> Option<f64> {
        let param = self.param(key)?;
        self.number_of(&param, key)
    }

    fn number_of(&mut self, param: &Param, key: &str) -> Option<f64> {
        let file = self.card.file;
        let (range, quoted) = (param.value.range, param.value.quoted);
        let value = self
            .env
            .text_value(self.program, file, range, quoted, self.issues);
        if value.is_none() && !range.is_empty() {
            let text = self.text(range);
            self.bad(
                range,
                format!("`{key}={text}`: `{text}` is no number"),
                None,
            );
        }
        value
    }

    fn positive(&mut self, key: &str) -> Option<f64> {
        let value = self.number(key)?;
        if value > 0.0 {
            return Some(value);
        }
        let range = self
            .param(key)
            .map_or(self.mark.word.range, |p| p.value.range);
        self.bad(range, format!("`{key}=` must be above zero"), None);
        None
    }

    fn not_negative(&mut self, key: &str) -> Option<f64> {
        let value = self.number(key)?;
        if value >= 0.0 {
            return Some(value);
        }
        let range = self
            .param(key)
            .map_or(self.mark.word.range, |p| p.value.range);
        self.bad(range, format!("`{key}=` must not be negative"), None);
        None
    }

    fn range_of(&self, param: &Param) -> Option<[f64; 2]> {
        let text = self.text(param.value.range);
        let (low, high) = text.split_once("..")?;
        let low = parse_number(low).ok()?.value;
        let high = parse_number(high).ok()?.value;
        (low > 0.0 && low < high).then_some([low, high])
    }

    fn range(&self, key: &str) -> Option<[f64; 2]> {
        self.range_of(&self.param(key)?)
    }

    fn names(&mut self) -> Option<Vec<PinTie>> {
        let names: Vec<PinTie> = self
            .mark
            .words
            .iter()
            .map(|word| self.word(*word))
            .collect();
        if names.is_empty() {
            self.bad(self.mark.word.range, "a name is missing".to_owned(), None);
            return None;
        }
        Some(names)
    }

    fn first_name(&mut self) -> Option<PinTie> {
        self.names()?.into_iter().next()
    }

    fn block(&mut self) -> Option<BlockMark> {
        let name = self.first_name()?;
        let mut ports = Vec::new();
        for key in ["in", "out", "ports"] {
            if let Some(param) = self.param(key) {
                self.port_words(param.value.range, &mut ports);
            }
        }
        let z0_ohm = self.positive("z0").unwrap_or(50.0);
        let of = self.param("of").map(|param| PinTie {
            name: self.text(param.value.range),
            span: self.span(param.value.range),
        });
        Some(BlockMark {
            name: name.name,
            span: name.span,
            ports,
            z0_ohm,
            band_hz: self.range("band"),
            sweep_hz: self.range("sweep"),
            of,
        })
    }

    /// `a`, `a:50`, or several joined by commas.
    fn port_words(&mut self, range: TextRange, ports: &mut Vec<PortWord>) {
        let text = self.text(range);
        let mut at = range.start;
        for piece in text.split(',') {
            let whole = TextRange::new(at, at + piece.len() as u32);
            at = whole.end + 1;
            let (name, ohm) = match piece.rsplit_once(':') {
                Some((name, ohm)) => (name, Some(ohm)),
                None => (piece, None),
            };
            if name.is_empty() {
                let place = if whole.is_empty() { range } else { whole };
                self.bad(place, "a port's name is missing".to_owned(), None);
                continue;
            }
            let value = ohm
                .and_then(|text| parse_number(text).ok())
                .map(|n| n.value);
            if ohm.is_some() && !value.is_some_and(|v| v > 0.0) {
                let message = format!("`{piece}`: a port takes `node:ohms` with ohms above zero");
                self.bad(whole, message, None);
            }
            let end = whole.start + name.len() as u32;
            ports.push(PortWord {
                name: PinTie {
                    name: name.to_owned(),
                    span: self.span(TextRange::new(whole.start, end)),
                },
                ohm: value.filter(|v| *v > 0.0),
            });
        }
    }

    fn rail(&mut self) -> Option<RailMark> {
        let node = self.first_name()?;
        let _ = self.number("volts");
        let ohm = self.not_negative("ohms");
        let henry = self.not_negative("henries");
        Some(RailMark {
            node,
            ohm: ohm.unwrap_or(0.0),
            henry: henry.unwrap_or(0.0),
            has_impedance: ohm.is_some_and(|v| v > 0.0) || henry.is_some_and(|v| v > 0.0),
        })
    }

    fn tie(&mut self) -> Option<TieMark> {
        let node = self.first_name()?;
        let Some(param) = self.param("to") else {
            self.bad(self.mark.word.range, "`to=` is missing".to_owned(), None);
            return None;
        };
        let text = self.text(param.value.range);
        let to = if crate::circuit::is_ground(&text) {
            TieTo::Ground
        } else if text.eq_ignore_ascii_case("open") {
            TieTo::Open
        } else {
            match self.positive("to") {
                Some(ohm) => TieTo::Resistor(ohm),
                None => return None,
            }
        };
        Some(TieMark { node, to })
    }

    fn device(&mut self) -> Option<DeviceMark> {
        let target = self.first_name()?;
        let pins = self.param("pins").map(|param| {
            self.text(param.value.range)
                .split(',')
                .map(|pin| pin.trim().to_ascii_lowercase())
                .collect()
        });
        let mut values = Vec::new();
        for (key, kind) in DEVICE {
            if *kind != KeyKind::Number {
                continue;
            }
            if let (Some(param), Some(value)) = (self.param(key), self.number(key)) {
                let span = self.span(param.value.range);
                values.push(((*key).to_owned(), value, span));
            }
        }
        let data = self.param("data").map(|param| self.text(param.value.range));
        Some(DeviceMark {
            target,
            pins,
            values,
            data,
        })
    }

    fn quiet(&mut self) -> Option<QuietMark> {
        let rules = self.names()?;
        let on = self.param("on").map(|param| self.text(param.value.range));
        let why = self.param("why").map(|param| {
            self.text(param.value.range)
                .trim_matches(['"', '\''])
                .to_owned()
        });
        if why.as_ref().is_none_or(|text| text.trim().is_empty()) {
            let message = "`why=` is required: say why the finding is accepted".to_owned();
            self.bad(self.mark.word.range, message, None);
            return None;
        }
        Some(QuietMark { rules, on, why })
    }
}
