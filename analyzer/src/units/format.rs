//! Engineering notation: number, space, prefix and unit (`1.33 GHz`, `-1.92 mS`).

/// Prefixes by power of a thousand, from 1e-18 up.
const PREFIXES: [&str; 11] = ["a", "f", "p", "n", "\u{B5}", "m", "", "k", "M", "G", "T"];
const ZERO_PREFIX: i32 = 6;

/// `value` with three significant digits and the prefix that leaves one to three digits
/// before the point. Values outside 1e-18..1e15 are written with a power of ten.
pub fn engineering(value: f64, unit: &str) -> String {
    match split(value) {
        Some((scaled, prefix)) => format!("{} {prefix}{unit}", significant(scaled)),
        None => format!("{value:.3e} {unit}"),
    }
}

/// A frequency.
pub fn hertz(value_hz: f64) -> String {
    engineering(value_hz, "Hz")
}

/// A time.
pub fn seconds(value_sec: f64) -> String {
    engineering(value_sec, "s")
}

/// A ratio in per cent with two significant digits at least.
pub fn percent(ratio: f64) -> String {
    format!("{:.0} %", ratio * 100.0)
}

/// `from 0.94 GHz to 1.72 GHz`: the lower end takes the prefix of the upper one while it
/// stays above a tenth of it, so that both ends read on one scale.
pub fn hertz_range(low_hz: f64, high_hz: f64) -> String {
    let shared = split(high_hz).and_then(|(high, prefix)| {
        let low = low_hz * (high / high_hz);
        let decimals = decimals_of(high);
        (low >= 0.1).then(|| format!("{low:.decimals$} {prefix}Hz to {high:.decimals$} {prefix}Hz"))
    });
    match shared {
        Some(text) if significant_differs(low_hz, high_hz) => format!("from {text}"),
        _ => narrow_range(low_hz, high_hz),
    }
}

/// Two ends that three digits do not tell apart are written with as many as it takes.
fn narrow_range(low_hz: f64, high_hz: f64) -> String {
    if significant_differs(low_hz, high_hz) {
        return format!("from {} to {}", hertz(low_hz), hertz(high_hz));
    }
    let Some((high, prefix)) = split(high_hz) else {
        return format!("from {low_hz:e} Hz to {high_hz:e} Hz");
    };
    let factor = high / high_hz;
    let gap = ((high_hz - low_hz) * factor).abs();
    let decimals = if gap > 0.0 {
        ((2.0 - gap.log10().floor()) as usize).min(12)
    } else {
        3
    };
    let low = low_hz * factor;
    format!("from {low:.decimals$} {prefix}Hz to {high:.decimals$} {prefix}Hz")
}

fn significant_differs(low: f64, high: f64) -> bool {
    (high - low).abs() >= 0.005 * high.abs()
}

/// The value scaled to 1..1000 and its prefix; `None` outside the prefixes or not finite.
fn split(value: f64) -> Option<(f64, &'static str)> {
    if value == 0.0 {
        return Some((0.0, ""));
    }
    if !value.is_finite() {
        return None;
    }
    let mut power = (value.abs().log10() / 3.0).floor() as i32;
    let mut scaled = value / 1000f64.powi(power);
    if scaled.abs() >= 999.5 {
        power += 1;
        scaled /= 1000.0;
    }
    let index = usize::try_from(power + ZERO_PREFIX).ok()?;
    Some((scaled, PREFIXES.get(index)?))
}

/// Decimals that leave three significant digits for a value of 0.1..1000.
fn decimals_of(scaled: f64) -> usize {
    match scaled.abs() {
        m if m >= 99.95 => 0,
        m if m >= 9.995 => 1,
        _ => 2,
    }
}

fn significant(scaled: f64) -> String {
    if scaled == 0.0 {
        return "0".to_owned();
    }
    let decimals = decimals_of(scaled);
    format!("{scaled:.decimals$}")
}

#[cfg(test)]
mod tests {
    use super::*;

    #[test]
    fn engineering_notation() {
        assert_eq!(engineering(1.33e9, "Hz"), "1.33 GHz");
        assert_eq!(engineering(-1.92e-3, "S"), "-1.92 mS");
        assert_eq!(engineering(999.96, "Hz"), "1.00 kHz");
        assert_eq!(engineering(0.0, "S"), "0 S");
        assert_eq!(engineering(47e-6, "F"), "47.0 \u{B5}F");
        assert_eq!(engineering(f64::INFINITY, "S"), "inf S");
        assert_eq!(engineering(1e30, "S"), "1.000e30 S");
    }

    #[test]
    fn ranges_share_a_prefix_where_that_reads_well() {
        assert_eq!(hertz_range(0.94e9, 1.72e9), "from 0.94 GHz to 1.72 GHz");
        assert_eq!(hertz_range(1e3, 1e9), "from 1.00 kHz to 1.00 GHz");
        assert_eq!(
            hertz_range(10000002.84, 10000052.84),
            "from 10.0000028 MHz to 10.0000528 MHz"
        );
    }
}
