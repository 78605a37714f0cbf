//! Settings as data. Reading them from a file is the server's business.

/// Everything that can be set.
#[derive(Clone, PartialEq, Debug)]
pub struct Config {
    /// Bounds on the work.
    pub limits: LimitsConfig,
    /// Default sweep, Hz, for blocks that name none.
    pub sweep_hz: [f64; 2],
}

/// `[limits]`
#[derive(Clone, PartialEq, Eq, Debug)]
pub struct LimitsConfig {
    /// States up to which natural modes are computed exactly.
    pub states: usize,
    /// Flat parts of one circuit.
    pub parts: usize,
    /// Nesting of instances and includes.
    pub nesting: usize,
    /// Bytes of one file.
    pub file_bytes: usize,
}

impl Default for Config {
    fn default() -> Self {
        Self {
            limits: LimitsConfig {
                states: 1_500,
                parts: 1_000_000,
                nesting: 64,
                file_bytes: 64 << 20,
            },
            sweep_hz: [1e3, 100e9],
        }
    }
}
