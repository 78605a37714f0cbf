//! Frequencies of a sweep: a logarithmic grid, denser around every lightly damped mode.

/// Points per decade of the plain grid.
const PER_DECADE: f64 = 60.0;
/// Places around a mode, in half widths.
const AROUND: [f64; 9] = [-4.0, -2.0, -1.0, -0.5, 0.0, 0.5, 1.0, 2.0, 4.0];
/// Modes with less damping get points of their own.
const LIGHT: f64 = 0.5;
/// Least half width over frequency, for modes on the axis.
const LEAST_WIDTH: f64 = 1e-8;

/// Rising frequencies from `low_hz` to `high_hz`, both ends included. `modes` are pairs of
/// frequency in hertz and damping.
pub fn frequency_grid(low_hz: f64, high_hz: f64, modes: &[(f64, f64)]) -> Vec<f64> {
    let decades = (high_hz / low_hz).log10();
    let steps = (decades * PER_DECADE).ceil().max(1.0) as usize;
    let mut grid: Vec<f64> = (0..=steps)
        .map(|k| low_hz * (high_hz / low_hz).powf(k as f64 / steps as f64))
        .collect();
    if let Some(last) = grid.last_mut() {
        *last = high_hz;
    }
    for &(hz, damping) in modes {
        if damping.abs() < LIGHT && hz > 0.0 {
            let half_width = damping.abs().max(LEAST_WIDTH);
            grid.extend(AROUND.iter().map(|k| hz * (1.0 + k * half_width)));
        }
    }
    grid.retain(|hz| *hz >= low_hz && *hz <= high_hz);
    grid.sort_by(f64::total_cmp);
    grid.dedup_by(|a, b| (*a - *b).abs() <= 1e-14 * *b);
    grid
}

#[cfg(test)]
mod tests {
    use super::*;

    #[test]
    fn ends_are_exact_and_modes_are_met() {
        let grid = frequency_grid(1e3, 1e9, &[(1.1e7, 1e-5), (5e9, 0.1)]);
        assert_eq!(grid.first(), Some(&1e3));
        assert_eq!(grid.last(), Some(&1e9));
        assert!(grid.contains(&1.1e7), "the mode itself is a point");
        let near = grid.iter().filter(|f| (*f / 1.1e7 - 1.0).abs() < 5e-5);
        assert_eq!(near.count(), 9, "nine points around the mode");
        assert!(grid.windows(2).all(|w| w[0] < w[1]), "rising");
    }
}
