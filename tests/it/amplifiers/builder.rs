//! Netlist text under construction: names, nodes, cards, devices placed flat or as subcircuits. Counts the unknowns.
//! Must not choose circuits.

use super::devices::{Device, bipolar, cascode, field_effect};
use super::random::Random;

/// Share of circuits with lossy parts and heavy loading, most of them stable.
const CALM_SHARE: f64 = 0.15;

/// A value with a scale factor, four or more significant digits.
fn value(x: f64) -> String {
    const SCALES: [(f64, &str); 9] = [
        (1e6, "meg"),
        (1e3, "k"),
        (1.0, ""),
        (1e-3, "m"),
        (1e-6, "u"),
        (1e-9, "n"),
        (1e-12, "p"),
        (1e-15, "f"),
        (1e-18, ""),
    ];
    for (scale, letters) in SCALES {
        if x.abs() >= scale && scale > 1e-18 {
            return format!("{:.3}{letters}", x / scale);
        }
    }
    format!("{x:.4e}")
}

/// The text under construction with what is needed to name things.
pub(super) struct Amplifier {
    pub(super) random: Random,
    pub(super) cards: Vec<String>,
    pub(super) definitions: Vec<String>,
    pub(super) models: Vec<String>,
    pub(super) serial: usize,
    pub(super) unknowns: usize,
    pub(super) hierarchical: bool,
    pub(super) drive: Option<f64>,
    pub(super) calm: f64,
    pub(super) rail: String,
    pub(super) inputs: Vec<String>,
    pub(super) title: String,
}

impl Amplifier {
    pub(super) fn new(title: String, stream: u64, drive: Option<f64>) -> Self {
        let mut random = Random::new(stream);
        let hierarchical = random.chance(0.5);
        let drive = drive.or(random.chance(0.4).then_some(1.0));
        let calm = if random.chance(CALM_SHARE) { 1.0 } else { 0.0 };
        Self {
            random,
            cards: Vec::new(),
            definitions: Vec::new(),
            models: Vec::new(),
            serial: 0,
            unknowns: 0,
            hierarchical,
            drive,
            calm,
            rail: String::new(),
            inputs: Vec::new(),
            title,
        }
    }

    pub(super) fn node(&mut self) -> String {
        self.serial += 1;
        self.unknowns += 1;
        format!("n{}", self.serial)
    }

    /// A part with a given value; returns its name.
    pub(super) fn part(&mut self, name: &str, nodes: &str, x: f64) -> String {
        self.serial += 1;
        if name.starts_with(['L', 'V', 'E', 'H']) {
            self.unknowns += 1;
        }
        let name = format!("{name}{}", self.serial);
        self.cards.push(format!("{name} {nodes} {}", value(x)));
        name
    }

    /// A part with a log-uniform value; returns its name.
    pub(super) fn draw(&mut self, name: &str, a: &str, b: &str, low: f64, high: f64) -> String {
        let x = self.random.log_uniform(low, high);
        self.part(name, &format!("{a} {b}"), x)
    }

    /// A part from `from` to a new node, which is returned.
    pub(super) fn series(&mut self, name: &str, from: &str, low: f64, high: f64) -> String {
        let to = self.node();
        self.draw(name, from, &to, low, high);
        to
    }

    pub(super) fn gain_text(&self, parameter: &str, x: f64) -> String {
        match self.drive {
            Some(_) if ["gm", "beta"].contains(&parameter) => format!("{{{}*drive}}", value(x)),
            _ => value(x),
        }
    }

    pub(super) fn device(&mut self) -> Device {
        match self.random.below(10) {
            0..=5 => field_effect(&mut self.random),
            6..=8 => bipolar(&mut self.random),
            _ => cascode(&mut self.random),
        }
    }

    /// Places a device between nets: as an instance of a subcircuit, or written out.
    pub(super) fn place(&mut self, device: &Device, input: &str, output: &str, common: &str) {
        self.serial += 1;
        self.unknowns += device.unknowns();
        let id = self.serial;
        if self.hierarchical {
            self.define(device);
            let mut card = format!("Xq{id} {input} {output} {common} {}", device.model);
            for (k, (name, x)) in device.values.iter().enumerate() {
                card.push_str(if k % 5 == 4 { "\n+ " } else { " " });
                card.push_str(&format!("{name}={}", self.gain_text(name, *x)));
            }
            self.cards.push(card);
            return;
        }
        let net = |token: &str| match token {
            "g" => input.to_owned(),
            "d" => output.to_owned(),
            "s" => common.to_owned(),
            "0" => "0".to_owned(),
            "Vb" => format!("Vb{id}"),
            inner => format!("q{id}_{inner}"),
        };
        for (name, nodes, parameter) in &device.cards {
            let nodes: Vec<String> = nodes.split(' ').map(net).collect();
            let known = device.values.iter().find(|(p, _)| p == parameter);
            let text = known.map_or("0".to_owned(), |(p, x)| self.gain_text(p, *x));
            self.cards
                .push(format!("{name}{id} {} {text}", nodes.join(" ")));
        }
    }

    pub(super) fn define(&mut self, device: &Device) {
        if self.models.contains(&device.model) {
            return;
        }
        self.models.push(device.model.clone());
        let defaults: Vec<String> = device
            .values
            .iter()
            .map(|(name, x)| format!("{name}={}", value(*x)))
            .collect();
        self.definitions.push(format!(
            ".subckt {} g d s {}",
            device.model,
            defaults.join(" ")
        ));
        for (name, nodes, parameter) in &device.cards {
            let text = if parameter.is_empty() {
                "0".to_owned()
            } else {
                format!("{{{parameter}}}")
            };
            self.definitions.push(format!("{name} {nodes} {text}"));
        }
        self.definitions.push(".ends".to_owned());
    }

    pub(super) fn text(&self, ports: &str) -> String {
        let mut lines = vec![format!(
            "Amplifier {} (invented), {} unknowns",
            self.title, self.unknowns
        )];
        lines.push(format!("*~ block {} {ports}", self.title));
        if let Some(drive) = self.drive {
            lines.push(format!(".param drive={drive}"));
        }
        lines.extend(self.definitions.iter().cloned());
        lines.extend(self.cards.iter().cloned());
        lines.push(".end".to_owned());
        lines.join("\n") + "\n"
    }
}
