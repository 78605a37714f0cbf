//! Pieces that every stage is made of: supply rail, decoupling, chokes, bias, matching, paralleled devices, feedback.

use super::builder::Amplifier;

impl Amplifier {
    /// Bypass from `node` to ground: a capacitor with series resistance and inductance.
    pub(super) fn bypass(&mut self, node: &str, low_farad: f64, high_farad: f64) {
        let plate = self.series("Cb", node, low_farad, high_farad);
        if self.random.chance(0.6) {
            let inner = self.series("Re", &plate, 0.03, 1.5);
            self.draw("Lb", &inner, "0", 0.1e-9, 2e-9);
        } else {
            self.draw("Re", &plate, "0", 0.03, 3.0);
        }
    }

    /// The shared supply: source, lead, bulk capacitor. Built on first use.
    pub(super) fn rail(&mut self) -> String {
        if self.rail.is_empty() {
            let (source, lead) = (self.node(), self.node());
            self.part("Vdd", &format!("{source} 0"), 5.0);
            self.draw("Lw", &source, &lead, 2e-9, 300e-9);
            self.rail = self.series("Rw", &lead, 5e-3, 3.0);
            let rail = self.rail.clone();
            self.bypass(&rail, 10e-9, 100e-6);
        }
        self.rail.clone()
    }

    /// A supply point of one stage, decoupled from the rail.
    pub(super) fn feed(&mut self) -> String {
        let rail = self.rail();
        let local = self.series("Rd", &rail, 1.0, 60.0);
        if self.random.chance(0.3) {
            let bead = format!("{rail} {local}");
            let henry = self.random.log_uniform(20e-9, 2e-6);
            self.part("Lf", &bead, henry);
        }
        self.bypass(&local, 10e-12, 100e-9);
        local
    }

    /// A lossy choke.
    pub(super) fn choke(&mut self, a: &str, b: &str) {
        let low_q = self.random.chance(0.2 + 0.6 * self.calm);
        if low_q {
            self.draw("Lc", a, b, 1e-9, 1e-6);
            self.draw("Rp", a, b, 40.0, 5e3 - 4e3 * self.calm);
        } else {
            let inner = self.series("Rl", a, 0.2, 8.0);
            self.draw("Lc", &inner, b, 0.5e-9, 1e-6);
        }
    }

    /// Gate or base bias: a resistor, or a choke from a bypassed point.
    pub(super) fn bias(&mut self, gate: &str) {
        if self.random.chance(0.5 + 0.3 * self.calm) {
            let high = if self.calm > 0.0 { 3e3 } else { 50e3 };
            self.draw("Rg", gate, "0", 150.0, high);
        } else {
            let point = self.series("Rb", "0", 100.0, 10e3);
            self.bypass(&point, 10e-12, 10e-9);
            self.choke(&point, gate);
        }
    }

    /// A matching section: series inductor or resistor with a shunt element; returns the far node.
    pub(super) fn matching(&mut self, from: &str) -> String {
        let to = self.series("Lm", from, 0.1e-9, 6e-9);
        match self.random.below(3) {
            0 => self.draw("Cm", &to, "0", 0.05e-12, 4e-12),
            1 => self.draw("Cm", from, "0", 0.05e-12, 4e-12),
            _ => self.draw("Rm", &to, "0", 60.0, 2e3),
        };
        to
    }

    /// The common terminal: ground, or degeneration, the bypass of which may be a poor one.
    pub(super) fn common(&mut self) -> String {
        match self.random.below(6) {
            0 => {
                let node = self.series("Rs", "0", 1.0, 80.0);
                if self.random.chance(0.3 + 0.3 * self.calm) {
                    self.bypass(&node, 1e-9, 100e-9);
                } else if self.calm < 1.0 {
                    self.draw("Cs", &node, "0", 0.1e-12, 20e-12);
                }
                node
            }
            1 => self.series("Ls", "0", 0.02e-9, 0.4e-9),
            _ => "0".to_owned(),
        }
    }

    /// One or several devices in parallel; identical ones give repeated modes.
    pub(super) fn devices(&mut self, input: &str, output: &str, count: u64) {
        let device = self.device();
        let common = self.common();
        if count < 2 {
            self.place(&device, input, output, &common);
            return;
        }
        let identical = self.random.chance(0.6);
        let spread = self.random.log_uniform(1e-3, 0.15);
        let (lead_in, lead_out) = (
            self.random.log_uniform(0.1e-9, 1.5e-9),
            self.random.log_uniform(0.1e-9, 1.5e-9),
        );
        let stopper = self.random.log_uniform(0.3, 3.0 + 13.0 * self.calm);
        let odd_mode = self.random.chance(0.15 + 0.65 * self.calm);
        let odd_mode_ohm = self.random.log_uniform(10.0, 150.0);
        let mut ends: Vec<(String, String)> = Vec::new();
        for _ in 0..count {
            let (mid, gate, drain) = (self.node(), self.node(), self.node());
            self.part("Li", &format!("{input} {mid}"), lead_in);
            self.part("Ri", &format!("{mid} {gate}"), stopper);
            self.part("Lo", &format!("{drain} {output}"), lead_out);
            let own = if identical {
                device.clone()
            } else {
                device.spread(&mut self.random, spread)
            };
            self.place(&own, &gate, &drain, &common);
            if let Some((gate_before, drain_before)) = ends.last().filter(|_| odd_mode) {
                let (gates, drains) = (
                    format!("{gate_before} {gate}"),
                    format!("{drain_before} {drain}"),
                );
                self.part("Rq", &gates, odd_mode_ohm);
                self.part("Rq", &drains, odd_mode_ohm);
            }
            ends.push((gate, drain));
        }
    }

    /// Feedback round one stage: resistor with blocking capacitor, or a capacitor.
    pub(super) fn feedback(&mut self, output: &str, input: &str) {
        match self.random.below(5) {
            0 => {
                let block = self.series("Rf", output, 80.0, 2e3);
                self.draw("Cf", &block, input, 2e-12, 10e-9);
            }
            1 => {
                self.draw("Cf", output, input, 5e-15, 0.3e-12);
            }
            _ => {}
        }
    }
}
