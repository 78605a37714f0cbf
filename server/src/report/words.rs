//! A block report in plain words and engineering units: the pieces that the block line and the
//! evidence share.

use squeg_analyzer::host::{BlockReport, ModeReport, TwoPortReport, Verdict};
use squeg_analyzer::units::{hertz, hertz_range, seconds};

/// The mode nearest to the axis counts as on it below this damping, as for the verdict
/// `marginal`.
const ON_AXIS: f64 = 1e-9;

/// The line behind `block NAME: `, without the verdict itself.
pub fn summary(block: &BlockReport) -> String {
    let mut parts = vec![mode_count(block)];
    parts.extend(worst_mode(block));
    parts.extend(block.two_port.as_ref().map(least_mu));
    parts.push(format!("sweep {}", sweep(block)));
    parts.push(format!("sight {}", block.sight.as_str()));
    if let Some(why) = &block.why {
        parts.push(format!("why: {why}"));
    }
    parts.join("; ")
}

fn sweep(block: &BlockReport) -> String {
    let [low, high] = block.sweep_hz;
    hertz_range(low, high)
}

fn mode_count(block: &BlockReport) -> String {
    let growing = match block.unstable_modes {
        None => "natural modes not counted".to_owned(),
        Some(0) => "no growing mode".to_owned(),
        Some(1) => "1 growing mode".to_owned(),
        Some(count) => format!("{count} growing modes"),
    };
    match block.axis_modes {
        None | Some(0) => growing,
        Some(count) => format!("{growing}, {count} on the axis"),
    }
}

/// The mode that decides: the one that grows fastest, or the least damped one if none grows.
fn worst_mode(block: &BlockReport) -> Option<String> {
    let grows = |mode: &&ModeReport| mode.growth_per_s > 0.0 && mode.damping < -ON_AXIS;
    let fastest = block
        .modes
        .iter()
        .filter(grows)
        .max_by(|a, b| a.growth_per_s.total_cmp(&b.growth_per_s));
    if let Some(mode) = fastest {
        return Some(format!("worst mode {}{}", course(mode), whereabouts(mode)));
    }
    let mode = block
        .modes
        .iter()
        .min_by(|a, b| a.damping.total_cmp(&b.damping))?;
    Some(format!(
        "least damped mode {}{}",
        course(mode),
        whereabouts(mode)
    ))
}

/// What a mode does: where it oscillates, whether it grows, and how fast.
fn course(mode: &ModeReport) -> String {
    let place = if mode.hz > 0.0 {
        format!("at {}", hertz(mode.hz))
    } else {
        "without oscillation".to_owned()
    };
    if mode.damping.abs() <= ON_AXIS {
        return format!("{place} neither grows nor decays");
    }
    let verb = if mode.growth_per_s > 0.0 {
        "grows"
    } else {
        "decays"
    };
    let damping = if mode.hz > 0.0 {
        format!(" (damping {})", figure(mode.damping))
    } else {
        String::new()
    };
    format!(
        "{place} {verb} with time constant {}{damping}",
        constant(mode)
    )
}

/// 1/|growth|, the time in which the amplitude changes by e.
pub fn constant(mode: &ModeReport) -> String {
    seconds(1.0 / mode.growth_per_s.abs())
}

fn whereabouts(mode: &ModeReport) -> String {
    match (mode.nodes.first(), mode.parts.first()) {
        (Some(node), Some(part)) => format!(", mainly node {} and part {}", node.name, part.name),
        (Some(node), None) => format!(", mainly node {}", node.name),
        (None, Some(part)) => format!(", mainly part {}", part.name),
        (None, None) => String::new(),
    }
}

fn least_mu(two_port: &TwoPortReport) -> String {
    format!(
        "least mu {} at {}",
        figure(two_port.mu_min),
        hertz(two_port.mu_min_hz)
    )
}

/// A bare number with three significant digits.
pub fn figure(value: f64) -> String {
    let magnitude = value.abs();
    if value == 0.0 {
        "0".to_owned()
    } else if !(1e-3..1e4).contains(&magnitude) {
        format!("{value:.2e}")
    } else {
        let decimals = (2 - magnitude.log10().floor() as i32).clamp(0, 5) as usize;
        format!("{value:.decimals$}")
    }
}

/// Whether a verdict is one that a designer hopes for.
pub fn is_good(verdict: Verdict) -> bool {
    matches!(verdict, Verdict::Stable | Verdict::UnconditionallyStable)
}

#[cfg(test)]
mod tests {
    use super::super::samples;
    use super::*;

    #[test]
    fn figures_have_three_digits() {
        for (value, text) in [
            (0.0, "0"),
            (0.0371, "0.0371"),
            (-0.5, "-0.500"),
            (12.345, "12.3"),
            (0.999_99, "1.000"),
            (1234.5, "1234"),
            (2.0e-5, "2.00e-5"),
            (f64::INFINITY, "inf"),
            (f64::NAN, "NaN"),
        ] {
            assert_eq!(figure(value), text);
        }
    }

    #[test]
    fn a_mode_that_does_not_oscillate() {
        let mut block = samples::latch();
        assert_eq!(
            worst_mode(&block).as_deref(),
            Some(
                "worst mode without oscillation grows with time constant 2.00 \u{B5}s, mainly node q"
            )
        );
        block.modes.clear();
        assert_eq!(worst_mode(&block), None);
    }

    #[test]
    fn a_sound_block_names_its_least_damped_mode() {
        let mut block = samples::stage();
        block.verdict = Verdict::Stable;
        block.unstable_modes = Some(0);
        block.why = None;
        block.modes.remove(0);
        assert_eq!(
            summary(&block),
            "no growing mode; least damped mode at 159 Hz decays with time constant 2.00 ms \
             (damping 0.448), mainly node b; least mu 0.840 at 650 MHz; \
             sweep from 1.00 kHz to 100 GHz; sight intrinsic"
        );
    }

    #[test]
    fn a_mode_on_the_axis() {
        let mut block = samples::stage();
        block.modes.remove(0);
        if let Some(mode) = block.modes.first_mut() {
            mode.growth_per_s = 1e-9;
            mode.damping = -1e-12;
        }
        assert_eq!(
            worst_mode(&block).as_deref(),
            Some("least damped mode at 159 Hz neither grows nor decays, mainly node b")
        );
    }

    #[test]
    fn counts_in_words() {
        let mut block = samples::latch();
        assert_eq!(mode_count(&block), "1 growing mode");
        block.unstable_modes = Some(0);
        block.axis_modes = Some(2);
        assert_eq!(mode_count(&block), "no growing mode, 2 on the axis");
        block.unstable_modes = None;
        block.axis_modes = None;
        assert_eq!(mode_count(&block), "natural modes not counted");
    }
}
