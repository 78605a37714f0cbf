//! Stages of the random amplifiers and how they are strung together. Each takes the node that drives it and returns
//! its output node.

use super::builder::Amplifier;

impl Amplifier {
    /// A tuned or broadband stage with chokes and matching.
    pub(super) fn radio_stage(&mut self, from: &str, room: usize) -> String {
        let mut gate = self.series("Cc", from, 1e-12, 10e-9);
        if room > 40 && self.random.chance(0.6) {
            gate = self.matching(&gate);
        }
        self.bias(&gate);
        if self.random.chance(0.1 + 0.7 * self.calm) {
            gate = self.series("Rg", &gate, 3.0, 15.0 + 25.0 * self.calm);
        }
        let drain = self.node();
        let count = if room > 60 && self.random.chance(0.45) {
            2 + self.random.below(3)
        } else {
            1
        };
        self.devices(&gate, &drain, count);
        let supply = if room > 30 { self.feed() } else { self.rail() };
        self.choke(&supply, &drain);
        if self.random.chance(0.05 + 0.85 * self.calm) {
            self.draw("Rx", &drain, &supply, 30.0, 400.0);
        }
        self.feedback(&drain, &gate);
        self.inputs.push(gate);
        if room > 40 && self.random.chance(0.4) {
            self.matching(&drain)
        } else {
            drain
        }
    }

    /// A stage tuned at gate and drain, lightly coupled to what drives it.
    pub(super) fn tuned_stage(&mut self, from: &str) -> String {
        let device = self.device();
        let farad = device.input_farad();
        let gate = self.node();
        let coupling = farad * self.random.log_uniform(0.05, 2.0);
        self.part("Cc", &format!("{from} {gate}"), coupling);
        let (inner, drain, common) = (
            self.series("Rg", &gate, 0.2, 4.0),
            self.node(),
            self.common(),
        );
        self.place(&device, &inner, &drain, &common);
        let tuned_hz = self.random.log_uniform(3e6, 8e9);
        let detune = self.random.log_uniform(0.9, 1.8);
        self.tank(&gate, farad, tuned_hz);
        self.tank(&drain, farad, tuned_hz * detune);
        self.inputs.push(gate);
        drain
    }

    /// A lossy parallel tank from `node` to ground, resonant with roughly `farad` of the device beside its own capacitor.
    pub(super) fn tank(&mut self, node: &str, farad: f64, resonance_hz: f64) {
        let own_farad = farad * self.random.log_uniform(0.2, 5.0);
        let omega = 2.0 * std::f64::consts::PI * resonance_hz;
        let henry = 1.0 / (omega * omega * (farad + own_farad));
        let q = self.random.log_uniform(4.0, 60.0) * (1.0 - 0.9 * self.calm);
        let ends = format!("{node} 0");
        self.part("Ct", &ends, own_farad);
        self.part("Lt", &ends, henry);
        self.part("Rt", &ends, q * omega * henry);
    }

    /// A resistor-loaded stage straight on the shared rail, coupled down to audio frequencies.
    pub(super) fn audio_stage(&mut self, from: &str) -> String {
        let gate = self.series("Cc", from, 1e-9, 1e-6);
        self.draw("Rg", &gate, "0", 1e3, 200e3);
        let (drain, rail) = (self.node(), self.rail());
        self.draw("Rl", &rail, &drain, 50.0, 3e3);
        self.devices(&gate, &drain, 1);
        self.feedback(&drain, &gate);
        self.inputs.push(gate);
        drain
    }

    /// A stage with a transformer in the output, sometimes with a third winding.
    pub(super) fn transformer_stage(&mut self, from: &str) -> String {
        let gate = self.series("Cc", from, 5e-12, 1e-9);
        self.bias(&gate);
        let (drain, output, supply) = (self.node(), self.node(), self.feed());
        self.devices(&gate, &drain, 1);
        let primary = self.draw("Lp", &supply, &drain, 1e-9, 500e-9);
        let secondary = self.draw("Ls", &output, "0", 1e-9, 500e-9);
        self.draw("Rp", &supply, &drain, 50.0, 1e3);
        self.draw("Rp", &output, "0", 50.0, 1e3);
        let coupling = 1.0 - self.random.log_uniform(0.01, 0.7);
        self.part("K", &format!("{primary} {secondary}"), coupling);
        if self.random.chance(0.6) {
            self.draw("Ct", &drain, "0", 0.1e-12, 20e-12);
        }
        self.inputs.push(gate);
        output
    }

    /// A bias servo: a slow amplifier compares the supply point of a stage and drives its gate. Of the wrong sign it latches.
    pub(super) fn servo_stage(&mut self, from: &str) -> String {
        let gate = self.series("Cc", from, 10e-12, 10e-9);
        let (drain, sense, command) = (self.node(), self.feed(), self.node());
        self.devices(&gate, &drain, 1);
        self.choke(&sense, &drain);
        self.draw("Rx", &drain, &sense, 30.0, 400.0);
        let gain =
            self.random.log_uniform(0.3, 30.0) * if self.random.chance(0.5) { -1.0 } else { 1.0 };
        self.part("Ea", &format!("{command} 0 {sense} 0"), gain);
        let slow = self.series("Ra", &command, 1e3, 50e3);
        self.draw("Ca", &slow, "0", 1e-9, 1e-6);
        self.draw("Rg", &slow, &gate, 300.0, 5e3);
        self.inputs.push(gate);
        drain
    }

    /// Two stages coupled directly, with a resistor from the second output back to the first input: a trigger if the gain suffices.
    pub(super) fn direct_pair(&mut self, from: &str) -> String {
        let gate = self.series("Rc", from, 200.0, 5e3);
        let (middle, output, rail) = (self.node(), self.node(), self.rail());
        self.devices(&gate, &middle, 1);
        self.draw("Rl", &rail, &middle, 30.0, 600.0);
        self.devices(&middle, &output, 1);
        self.draw("Rl", &rail, &output, 30.0, 600.0);
        self.draw("Rf", &output, &gate, 1e3, 60e3);
        self.inputs.push(gate);
        output
    }

    /// A follower behind an inductive lead, loaded by a resistor and a capacitor.
    pub(super) fn follower_stage(&mut self, from: &str) -> String {
        let coupled = self.series("Cc", from, 5e-12, 10e-9);
        self.draw("Rg", &coupled, "0", 500.0, 20e3);
        let mut gate = self.series("Lm", &coupled, 0.3e-9, 15e-9);
        if self.calm > 0.0 {
            gate = self.series("Rg", &gate, 10.0, 100.0);
        }
        let (output, supply, device) = (self.node(), self.feed(), self.device());
        self.place(&device, &gate, &supply, &output);
        self.draw("Re", &output, "0", 50.0, 2e3);
        self.draw("Cl", &output, "0", 0.1e-12, 20e-12);
        self.inputs.push(gate);
        output
    }

    /// A buffer with one pole.
    pub(super) fn buffer(&mut self, from: &str) -> String {
        let inner = self.series("Ri", from, 50.0, 500.0);
        self.draw("Ci", &inner, "0", 0.05e-12, 5e-12);
        self.draw("Ri", &inner, "0", 1e3, 50e3);
        let ideal = self.node();
        let gain = self.random.log_uniform(0.8, 4.0);
        self.part("Eb", &format!("{ideal} 0 {inner} 0"), gain);
        self.series("Ro", &ideal, 5.0, 60.0)
    }

    pub(super) fn stage(&mut self, from: &str, room: usize) -> String {
        match self.random.below(20) {
            0..=6 => self.radio_stage(from, room),
            7..=9 => self.tuned_stage(from),
            10 | 11 => self.audio_stage(from),
            12 | 13 => self.follower_stage(from),
            14 | 15 => self.transformer_stage(from),
            16 | 17 => self.servo_stage(from),
            18 => self.direct_pair(from),
            _ => self.buffer(from),
        }
    }

    /// Source and load in one of the forms a block mark can name; returns (input node, mark text of in and out).
    pub(super) fn terminations(&mut self) -> (String, String, String) {
        let (input, output) = (self.node(), self.node());
        let (a, b) = match self.random.below(4) {
            0 => ("in=rsource".to_owned(), format!("out={output}")),
            1 => ("in=vsource".to_owned(), "out=rload".to_owned()),
            2 => (format!("in={input}:75"), format!("out={output}:25")),
            _ => (format!("in={input}"), format!("out={output}")),
        };
        let cards = [
            (&a, "in=rsource", format!("Rsource {input} 0 50")),
            (&a, "in=vsource", format!("Vsource {input} 0 0")),
        ];
        for (mark, wanted, card) in cards {
            if mark == wanted {
                self.unknowns += usize::from(card.starts_with('V'));
                self.cards.push(card);
            }
        }
        if b == "out=rload" {
            self.cards.push(format!(
                "Rload {output} 0 50 $ the load is part of the circuit"
            ));
        }
        (input, output, format!("{a} {b}"))
    }

    /// Adds stages until about `target` unknowns are there, then writes everything out.
    pub(super) fn grow(&mut self, target: usize) -> String {
        let (input, output, ports) = self.terminations();
        let mut at = input;
        let mut first = true;
        while first || self.unknowns + 18 < target {
            let room = if first {
                target.saturating_sub(self.unknowns)
            } else {
                target - self.unknowns
            };
            at = if first && target < 26 {
                self.tuned_stage(&at)
            } else {
                self.stage(&at, room)
            };
            first = false;
        }
        if self.random.chance(0.25) && self.inputs.len() > 1 {
            let block = self.series("Rf", &at, 300.0, 20e3);
            let gate = self.inputs[0].clone();
            self.draw("Cf", &block, &gate, 1e-12, 10e-9);
        }
        if self.unknowns < 10 || self.random.chance(0.3) {
            at = self.matching(&at);
        }
        self.draw("Cc", &at, &output, 2e-12, 10e-9);
        self.text(&ports)
    }
}
