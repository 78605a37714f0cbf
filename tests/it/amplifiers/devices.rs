//! Small-signal equivalents of transistors with plausible random values (common practice): field-effect, bipolar,
//! cascode. Knows local nodes only; must not know the circuit round them.

use super::random::Random;

/// A device: cards in terms of local nodes, and the values of its parameters. Its pins are `g d s`, whatever its kind.
#[derive(Clone)]
pub(super) struct Device {
    pub(super) model: String,
    pub(super) cards: Vec<(&'static str, String, &'static str)>, // name, nodes (and control), parameter or nothing
    pub(super) values: Vec<(&'static str, f64)>,
}

impl Device {
    fn new(model: &str) -> Self {
        Self {
            model: model.to_owned(),
            cards: Vec::new(),
            values: Vec::new(),
        }
    }

    fn add(&mut self, name: &'static str, nodes: &str, parameter: &'static str, value: f64) {
        self.cards.push((name, nodes.to_owned(), parameter));
        if !parameter.is_empty() && !self.values.iter().any(|(p, _)| *p == parameter) {
            self.values.push((parameter, value));
        }
    }

    /// Inner nodes and branch currents that the device adds to the circuit.
    pub(super) fn unknowns(&self) -> usize {
        let mut inner: Vec<&str> = self
            .cards
            .iter()
            .flat_map(|(_, nodes, _)| nodes.split(' ').take(2))
            .collect();
        inner.retain(|node| !["0", "g", "d", "s"].contains(node));
        inner.sort_unstable();
        inner.dedup();
        inner.len()
            + self
                .cards
                .iter()
                .filter(|(name, ..)| name.starts_with(['L', 'V', 'E', 'H']))
                .count()
    }

    /// Capacitance between control terminal and common terminal.
    pub(super) fn input_farad(&self) -> f64 {
        let known = self
            .values
            .iter()
            .find(|(name, _)| ["cgs", "cpi"].contains(name));
        known.map_or(1e-12, |(_, farad)| *farad)
    }

    /// A copy whose values differ by up to `spread`, relative.
    pub(super) fn spread(&self, random: &mut Random, spread: f64) -> Self {
        let mut copy = self.clone();
        for (_, value) in &mut copy.values {
            *value *= 1.0 + spread * (2.0 * random.unit() - 1.0);
        }
        copy
    }
}

/// A field-effect device; lead inductances and channel resistance are there or not by chance.
pub(super) fn field_effect(random: &mut Random) -> Device {
    let shape = random.below(16);
    let mut device = Device::new(&format!("fet{shape}"));
    let cgs = random.log_uniform(0.08e-12, 4e-12);
    let source = if shape & 1 != 0 { "si" } else { "s" };
    if shape & 2 != 0 {
        device.add("Lg", "g g1", "lg", random.log_uniform(0.03e-9, 0.6e-9));
        device.add("Rg", "g1 gi", "rg", random.log_uniform(0.5, 8.0));
    } else {
        device.add("Rg", "g gi", "rg", random.log_uniform(0.5, 15.0));
    }
    let foot = if shape & 4 != 0 { "x" } else { source };
    device.add("Cgs", &format!("gi {foot}"), "cgs", cgs);
    if shape & 4 != 0 {
        device.add(
            "Ri",
            &format!("x {source}"),
            "ri",
            random.log_uniform(0.5, 5.0),
        );
    }
    device.add("Cgd", "gi di", "cgd", cgs * random.log_uniform(0.03, 0.25));
    device.add(
        "Gm",
        &format!("di {source} gi {foot}"),
        "gm",
        cgs * random.log_uniform(2e10, 1.5e11),
    );
    device.add(
        "Rds",
        &format!("di {source}"),
        "rds",
        random.log_uniform(80.0, 2e3),
    );
    device.add(
        "Cds",
        &format!("di {source}"),
        "cds",
        cgs * random.log_uniform(0.1, 0.6),
    );
    if shape & 1 != 0 {
        device.add("Ls", "si s1", "ls", random.log_uniform(5e-12, 0.15e-9));
        device.add("Rs", "s1 s", "rs", random.log_uniform(0.1, 3.0));
    }
    if shape & 8 != 0 {
        device.add("Ld", "d di", "ld", random.log_uniform(0.03e-9, 0.6e-9));
    } else {
        device.add("Rd", "d di", "rd", random.log_uniform(0.2, 4.0));
    }
    device
}

/// A bipolar device, its transport source controlled by voltage, or by the current of an ammeter in the base path.
pub(super) fn bipolar(random: &mut Random) -> Device {
    let shape = random.below(8);
    let mut device = Device::new(&format!("npn{shape}"));
    let gm = random.log_uniform(4e-3, 0.3);
    let (beta, cpi) = (
        random.log_uniform(40.0, 250.0),
        gm / random.log_uniform(3e9, 1.2e11),
    );
    let emitter = if shape & 1 != 0 { "si" } else { "s" };
    device.add(
        "Rb",
        "g gi",
        "rb",
        random.log_uniform(2.0, 60.0) * (0.04 / gm).sqrt(),
    );
    if shape & 2 != 0 {
        device.add("Vb", "gi bx", "", 0.0);
        device.add("Rpi", &format!("bx {emitter}"), "rpi", beta / gm);
        device.add("Fc", &format!("di {emitter} Vb"), "beta", beta);
    } else {
        device.add("Rpi", &format!("gi {emitter}"), "rpi", beta / gm);
        device.add("Gm", &format!("di {emitter} gi {emitter}"), "gm", gm);
    }
    device.add("Cpi", &format!("gi {emitter}"), "cpi", cpi);
    device.add("Cmu", "gi di", "cmu", cpi * random.log_uniform(0.01, 0.15));
    device.add(
        "Ro",
        &format!("di {emitter}"),
        "ro",
        random.log_uniform(20.0, 100.0) / gm,
    );
    if shape & 1 != 0 {
        device.add("Le", "si s1", "le", random.log_uniform(10e-12, 0.4e-9));
        device.add("Re", "s1 s", "re", random.log_uniform(0.1, 2.0));
    }
    if shape & 4 != 0 {
        device.add("Lc", "d di", "lc", random.log_uniform(0.1e-9, 1.0e-9));
    } else {
        device.add("Rc", "d di", "rc", random.log_uniform(0.5, 15.0));
    }
    device
}

/// A cascode: a common-source device under a common-gate one with gate lead and stopper.
pub(super) fn cascode(random: &mut Random) -> Device {
    let mut device = Device::new("cascode");
    let cgs = random.log_uniform(0.1e-12, 2e-12);
    let gm = cgs * random.log_uniform(3e10, 1.2e11);
    device.add("Rg", "g gi", "rg", random.log_uniform(0.5, 8.0));
    for (names, nodes) in [
        (
            ["Cgsa", "Cgda", "Gma", "Rdsa"],
            ["gi s", "gi x", "x s gi s", "x s"],
        ),
        (
            ["Cgsb", "Cgdb", "Gmb", "Rdsb"],
            ["u x", "u d", "d x u x", "d x"],
        ),
    ] {
        device.add(names[0], nodes[0], "cgs", cgs);
        device.add(names[1], nodes[1], "cgd", 0.12 * cgs);
        device.add(names[2], nodes[2], "gm", gm);
        device.add(names[3], nodes[3], "rds", 25.0 / gm);
    }
    device.add("Cx", "x 0", "cx", cgs * random.log_uniform(0.1, 0.5));
    device.add("Lu", "u uu", "lu", random.log_uniform(0.05e-9, 1e-9));
    device.add("Ru", "uu 0", "ru", random.log_uniform(0.2, 20.0));
    device
}
