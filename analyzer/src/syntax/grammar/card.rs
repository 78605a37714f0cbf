//! Element cards by letter, as IBIS-ISS 1.0 (IBIS Open Forum, 2011) lays them out; the
//! semiconductor cards `D Q J M Z` as is common practice.

use super::fault;
use super::fields::Field;
use crate::syntax::ast::{Card, CardKind, LineDelay, Param, Value, Word};
use crate::syntax::error::{SyntaxError, SyntaxErrorKind};
use crate::syntax::expr;
use crate::syntax::tree::Tree;
use crate::text::TextRange;
use crate::units::{NumberFault, parse_number};

/// The fields of a card in hand while it is read.
struct Fields<'a> {
    tree: &'a Tree,
    name: Word,
    /// Words and quoted values in order; `quoted` tells which.
    words: Vec<Value>,
    params: Vec<Param>,
    errors: &'a mut Vec<SyntaxError>,
}

/// Reads a card. `None` when it says too little to be anything; the fault is then in `errors`.
pub(super) fn read_card(
    tree: &Tree,
    fields: &[Field],
    errors: &mut Vec<SyntaxError>,
) -> Option<Card> {
    let Some(Field::Word(name)) = fields.first() else {
        let range = match fields.first()? {
            Field::Quoted(range) => *range,
            Field::Param(param) => param.key.range,
            Field::Call { name, .. } => name.range,
            Field::Sign(range) => *range,
            Field::Word(_) => return None,
        };
        let text = tree.slice(range).to_owned();
        errors.push(fault(SyntaxErrorKind::UnknownElement(text), range));
        return None;
    };
    let letter = tree.slice(name.range).chars().next()?.to_ascii_lowercase();
    let mut card = Fields {
        tree,
        name: *name,
        words: Vec::new(),
        params: Vec::new(),
        errors,
    };
    for field in &fields[1..] {
        match field {
            Field::Word(word) => card.words.push(Value {
                range: word.range,
                quoted: false,
            }),
            Field::Quoted(range) => card.words.push(Value {
                range: *range,
                quoted: true,
            }),
            Field::Param(param) => card.params.push(*param),
            Field::Call { .. } | Field::Sign(_) => {}
        }
    }
    let kind = card.kind(letter)?;
    if !matches!(kind, CardKind::NotComputed { .. }) {
        card.check_params();
    }
    Some(Card {
        name: *name,
        letter,
        kind,
        params: card.params,
    })
}

/// Whether the card carries a number or names a model: a title seldom does both look like a
/// card and end in a number.
pub(super) fn has_number_or_model(tree: &Tree, card: &Card) -> bool {
    let number = |value: &Value| parse_number(tree.slice(value.range)).is_ok();
    match &card.kind {
        CardKind::TwoTerminal { value, .. } | CardKind::Source { value, .. } => {
            value.as_ref().is_some_and(number)
        }
        CardKind::Coupling { factor, .. } => factor.as_ref().is_some_and(number),
        CardKind::VoltageControlled { gain, .. } | CardKind::CurrentControlled { gain, .. } => {
            number(gain)
        }
        _ => false,
    }
}

impl Fields<'_> {
    fn kind(&mut self, letter: char) -> Option<CardKind> {
        match letter {
            'r' => self.two_terminal("two nodes and a value in ohms"),
            'c' => self.two_terminal("two nodes and a value in farads"),
            'l' => self.two_terminal("two nodes and a value in henries"),
            'k' => self.coupling(),
            'v' | 'i' => self.source(),
            'e' | 'g' => self.voltage_controlled(letter),
            'f' | 'h' => self.current_controlled(letter),
            'x' => self.instance(),
            'd' => self.device(2, 2, "two nodes and a model"),
            'q' => self.device(3, 4, "collector, base, emitter and a model"),
            'j' | 'z' => self.device(3, 3, "drain, gate, source and a model"),
            'm' => self.device(4, 4, "drain, gate, source, bulk and a model"),
            't' => self.line(),
            'w' => self.multiport("a coupled line (W)", "a current-controlled switch (W)"),
            's' => self.multiport(
                "an S-parameter block (S)",
                "a voltage-controlled switch (S)",
            ),
            'b' => self.not_computed(2, "two nodes", "a nonlinear source (B)"),
            _ => {
                let text = self.tree.slice(self.name.range);
                let start: String = text.chars().take(1).collect();
                let kind = SyntaxErrorKind::UnknownElement(start);
                self.errors.push(fault(kind, self.name.range));
                None
            }
        }
    }

    fn text(&self, range: TextRange) -> &str {
        self.tree.slice(range)
    }

    fn missing(&mut self, needed: &'static str) -> Option<CardKind> {
        self.errors.push(fault(
            SyntaxErrorKind::MissingFields { needed },
            self.name.range,
        ));
        None
    }

    fn node(&self, index: usize) -> Option<Word> {
        self.words
            .get(index)
            .map(|value| Word { range: value.range })
    }

    fn nodes<const N: usize>(&self) -> Option<[Word; N]> {
        let mut nodes = [self.node(0)?; N];
        for (index, node) in nodes.iter_mut().enumerate() {
            *node = self.node(index)?;
        }
        Some(nodes)
    }

    fn param(&self, names: &[&str]) -> Option<Value> {
        self.params
            .iter()
            .find(|param| {
                let key = self.text(param.key.range);
                names.iter().any(|name| key.eq_ignore_ascii_case(name))
            })
            .map(|param| param.value)
    }

    fn two_terminal(&mut self, needed: &'static str) -> Option<CardKind> {
        let Some(nodes) = self.nodes::<2>() else {
            return self.missing(needed);
        };
        let letter = self.text(self.name.range).get(..1).unwrap_or("").to_owned();
        let named = self.param(&[letter.as_str(), "value"]);
        let first = self.words.get(2).copied();
        let second = self.words.get(3).copied();
        let is_number = |value: &Value, tree: &Tree| {
            value.quoted || starts_like_number(tree.slice(value.range))
        };
        // A model's name stands before the value; a lone word is the value's parameter.
        let (model, value) = match (first, second, named) {
            (Some(a), Some(b), None) if !is_number(&a, self.tree) && is_number(&b, self.tree) => {
                (Some(Word { range: a.range }), Some(b))
            }
            (Some(a), _, Some(v)) if !is_number(&a, self.tree) => {
                (Some(Word { range: a.range }), Some(v))
            }
            (Some(a), _, None) => (None, Some(a)),
            (_, _, named) => (None, named),
        };
        let Some(value) = value else {
            return self.missing(needed);
        };
        self.check_value(value);
        self.check_rest(3 + usize::from(model.is_some()));
        Some(CardKind::TwoTerminal {
            nodes,
            value: Some(value),
            model,
        })
    }

    /// Numbers behind the value are initial conditions and temperature terms of other
    /// programs; words there are a slip.
    fn check_rest(&mut self, from: usize) {
        let tail: Vec<Value> = self.words.get(from..).unwrap_or_default().to_vec();
        for value in tail {
            let text = self.text(value.range).to_owned();
            if !value.quoted && !starts_like_number(&text) {
                let kind = SyntaxErrorKind::UnexpectedWord(text);
                self.errors.push(fault(kind, value.range));
            }
        }
    }

    fn coupling(&mut self) -> Option<CardKind> {
        let named = self.param(&["k"]);
        let mut inductors: Vec<Word> = self
            .words
            .iter()
            .map(|value| Word { range: value.range })
            .collect();
        let factor = match named {
            Some(value) => Some(value),
            None => {
                let last = self.words.last().copied();
                inductors.pop();
                last
            }
        };
        let (Some(factor), true) = (factor, inductors.len() >= 2) else {
            return self.missing("two inductors and a coupling factor");
        };
        self.check_value(factor);
        Some(CardKind::Coupling {
            inductors,
            factor: Some(factor),
        })
    }

    /// DC value: the first number, or the one behind the word `dc`; AC and transient parts
    /// belong to a simulator.
    fn source(&mut self) -> Option<CardKind> {
        let Some(nodes) = self.nodes::<2>() else {
            return self.missing("two nodes");
        };
        let mut value = self.param(&["dc"]);
        if let (None, Some(third)) = (value, self.words.get(2).copied()) {
            let text = self.text(third.range).to_owned();
            if text.eq_ignore_ascii_case("dc") {
                value = self.words.get(3).copied();
            } else if third.quoted
                || starts_like_number(&text)
                || (self.words.len() == 3 && !is_waveform(&text))
            {
                value = Some(third);
            }
        }
        if let Some(value) = value {
            self.check_value(value);
        }
        Some(CardKind::Source { nodes, value })
    }

    fn voltage_controlled(&mut self, letter: char) -> Option<CardKind> {
        let needed = "two output nodes, two control nodes and a gain";
        if self.words.len() < 2 {
            return self.missing(needed);
        }
        let keyword = self
            .words
            .get(2)
            .map(|word| self.text(word.range).to_ascii_lowercase());
        let linear = if letter == 'e' { "vcvs" } else { "vccs" };
        match keyword.as_deref() {
            Some(word) if word == linear => {
                self.words.remove(2);
            }
            Some("laplace") => return self.not_computed(2, needed, "a Laplace source"),
            Some("pole") => return self.not_computed(2, needed, "a pole-zero source"),
            Some("foster") => return self.not_computed(2, needed, "a pole-residue source"),
            Some("delay") => return self.not_computed(2, needed, "a delay source"),
            Some("vcr" | "vccap") => {
                return self.not_computed(2, needed, "a voltage-controlled part");
            }
            Some("poly" | "pwl" | "npwl" | "ppwl" | "table" | "value" | "cur" | "vol" | "freq") => {
                return self.not_computed(2, needed, "a nonlinear controlled source");
            }
            _ => {}
        }
        let nonlinear = ["vol", "cur", "value", "table"];
        if self.param(&nonlinear).is_some() {
            return self.not_computed(2, needed, "a nonlinear controlled source");
        }
        let gain = self.words.get(4).copied().or_else(|| self.param(&["gain"]));
        let (Some(nodes), Some(gain)) = (self.nodes::<4>(), gain) else {
            return self.missing(needed);
        };
        self.check_value(gain);
        self.check_rest(5);
        Some(CardKind::VoltageControlled { nodes, gain })
    }

    fn current_controlled(&mut self, letter: char) -> Option<CardKind> {
        let needed = "two output nodes, a sensing V source and a gain";
        let Some(nodes) = self.nodes::<2>() else {
            return self.missing(needed);
        };
        let keyword = self
            .words
            .get(2)
            .map(|word| self.text(word.range).to_ascii_lowercase());
        let linear = if letter == 'f' { "cccs" } else { "ccvs" };
        match keyword.as_deref() {
            Some(word) if word == linear => {
                self.words.remove(2);
            }
            Some("laplace" | "pole" | "foster" | "delay") => {
                return self.not_computed(2, needed, "a frequency-dependent source");
            }
            Some("poly" | "pwl" | "table" | "value") => {
                return self.not_computed(2, needed, "a nonlinear controlled source");
            }
            _ => {}
        }
        let gain = self.words.get(3).copied().or_else(|| self.param(&["gain"]));
        let (Some(sense), Some(gain)) = (self.node(2), gain) else {
            return self.missing(needed);
        };
        self.check_value(gain);
        self.check_rest(4);
        Some(CardKind::CurrentControlled { nodes, sense, gain })
    }

    fn instance(&mut self) -> Option<CardKind> {
        let mut nodes: Vec<Word> = self
            .words
            .iter()
            .filter(|word| !self.text(word.range).eq_ignore_ascii_case("params:"))
            .map(|value| Word { range: value.range })
            .collect();
        match nodes.pop() {
            Some(subcircuit) => Some(CardKind::Instance { nodes, subcircuit }),
            None => self.missing("nodes and the name of a subcircuit"),
        }
    }

    fn device(&mut self, least: usize, most: usize, needed: &'static str) -> Option<CardKind> {
        let tree = self.tree;
        let name_like = |value: &Value| {
            let text = tree.slice(value.range);
            !value.quoted && !starts_like_number(text) && !text.eq_ignore_ascii_case("off")
        };
        let mut count = least;
        while count < most && self.words.get(count + 1).is_some_and(name_like) {
            count += 1;
        }
        let nodes: Vec<Word> = (0..count).filter_map(|i| self.node(i)).collect();
        match self.words.get(count).filter(|word| name_like(word)) {
            Some(model) if nodes.len() == count => Some(CardKind::Device {
                nodes,
                model: Word { range: model.range },
            }),
            _ => self.missing(needed),
        }
    }

    fn not_computed(
        &mut self,
        nodes: usize,
        needed: &'static str,
        what: &'static str,
    ) -> Option<CardKind> {
        let nodes_found: Vec<Word> = (0..nodes).filter_map(|i| self.node(i)).collect();
        if nodes_found.len() < nodes {
            return self.missing(needed);
        }
        Some(CardKind::NotComputed {
            nodes: nodes_found,
            what,
        })
    }

    /// An ideal line, by its impedance and its delay; any other T card is lossy or has a model.
    fn line(&mut self) -> Option<CardKind> {
        let delay = match (self.param(&["td"]), self.param(&["f"])) {
            (Some(delay), _) => Some(LineDelay::PerLength {
                delay,
                length: self.param(&["l"]),
            }),
            (None, Some(hz)) => Some(LineDelay::Wavelengths {
                hz,
                wavelengths: self.param(&["nl"]),
            }),
            (None, None) => None,
        };
        match (self.nodes::<4>(), self.param(&["z0", "zo"]), delay) {
            (Some(nodes), Some(z0), Some(delay)) if self.words.len() == 4 => {
                Some(CardKind::Line { nodes, z0, delay })
            }
            _ => self.not_computed(
                4,
                "four nodes",
                "a transmission line (T) without Z0= and TD= or F=",
            ),
        }
    }

    /// S and W are told apart from switches by their fields: a block names its data by a key.
    fn multiport(&mut self, block: &'static str, switch: &'static str) -> Option<CardKind> {
        let keys = [
            "mname",
            "tstonefile",
            "file",
            "fbase",
            "rlgcmodel",
            "rlgcfile",
            "tablemodel",
            "smodel",
            "umodel",
            "fsmodel",
            "n",
            "l",
        ];
        let what = if self.param(&keys).is_some() {
            block
        } else {
            self.words.pop();
            switch
        };
        let nodes = self.words.len();
        if nodes < 2 {
            return self.missing("at least two nodes and a model");
        }
        self.not_computed(nodes, "nodes", what)
    }

    fn check_params(&mut self) {
        for param in self.params.clone() {
            if !param.value.range.is_empty() {
                self.check_value(param.value);
            }
        }
    }

    /// A value must read as a number, a name or an expression.
    fn check_value(&mut self, value: Value) {
        if let Some(kind) = value_fault(self.tree.slice(value.range), value.quoted) {
            let told = self
                .errors
                .iter()
                .rev()
                .take(4)
                .any(|error| error.range.meets(value.range));
            if !told {
                self.errors.push(fault(kind, value.range));
            }
        }
    }
}

/// What is wrong with a value's text, if anything.
pub(super) fn value_fault(text: &str, quoted: bool) -> Option<SyntaxErrorKind> {
    if quoted {
        if text.starts_with('"') {
            return None;
        }
        let inner = text.get(1..text.len().saturating_sub(1)).unwrap_or("");
        return expr::compile(inner)
            .err()
            .map(SyntaxErrorKind::BadExpression);
    }
    match parse_number(text) {
        Ok(_) => None,
        Err(NumberFault::OutOfRange) => Some(SyntaxErrorKind::NumberOutOfRange(text.to_owned())),
        Err(_) => match expr::compile(text) {
            Ok(_) => None,
            Err(_) if starts_like_number(text) => Some(SyntaxErrorKind::BadNumber(text.to_owned())),
            Err(fault) => Some(SyntaxErrorKind::BadExpression(fault)),
        },
    }
}

/// Whether a text starts as a number does.
fn starts_like_number(text: &str) -> bool {
    let digits = text.trim_start_matches(['+', '-']);
    let digits = digits.strip_prefix('.').unwrap_or(digits);
    digits.starts_with(|c: char| c.is_ascii_digit())
}

fn is_waveform(text: &str) -> bool {
    [
        "ac", "pulse", "sin", "exp", "pwl", "sffm", "am", "pat", "prbs", "tran",
    ]
    .iter()
    .any(|word| text.eq_ignore_ascii_case(word))
}
