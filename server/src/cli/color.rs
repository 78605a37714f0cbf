//! Whether a result is written in colour: the option, then the environment, then whether
//! standard output is a terminal.

use super::args::ColorWhen;
use crate::report::Paint;
use std::io::IsTerminal;

/// The paint for standard output.
pub fn paint(when: ColorWhen) -> Paint {
    let variable = |name: &str| std::env::var(name).ok();
    decide(when, std::io::stdout().is_terminal(), variable)
}

/// `NO_COLOR` (not empty) outranks `CLICOLOR_FORCE` (neither empty nor 0); both are common
/// practice. A terminal that calls itself dumb gets none.
fn decide(when: ColorWhen, terminal: bool, variable: impl Fn(&str) -> Option<String>) -> Paint {
    let set = |name: &str| variable(name).filter(|value| !value.is_empty());
    let forced = set("CLICOLOR_FORCE").is_some_and(|value| value != "0");
    let dumb = set("TERM").is_some_and(|value| value == "dumb");
    let color = match when {
        ColorWhen::Always => true,
        ColorWhen::Never => false,
        ColorWhen::Auto if set("NO_COLOR").is_some() => false,
        ColorWhen::Auto => forced || (terminal && !dumb),
    };
    if color { Paint::Color } else { Paint::Plain }
}

#[cfg(test)]
mod tests {
    use super::*;

    #[test]
    fn option_then_environment_then_terminal() {
        let with = |when, terminal, environment: &[(&str, &str)]| {
            let variable = |name: &str| {
                let found = environment.iter().find(|(key, _)| *key == name);
                found.map(|(_, value)| (*value).to_owned())
            };
            decide(when, terminal, variable).is_color()
        };
        use ColorWhen::{Always, Auto, Never};
        assert!(with(Auto, true, &[]), "a terminal");
        assert!(!with(Auto, false, &[]), "a pipe");
        assert!(!with(Auto, true, &[("NO_COLOR", "1")]), "not wanted");
        assert!(with(Auto, true, &[("NO_COLOR", "")]), "empty is unset");
        assert!(!with(Auto, true, &[("TERM", "dumb")]), "cannot");
        assert!(with(Auto, false, &[("CLICOLOR_FORCE", "1")]), "forced");
        assert!(!with(Auto, false, &[("CLICOLOR_FORCE", "0")]), "not forced");
        let both = [("NO_COLOR", "1"), ("CLICOLOR_FORCE", "1")];
        assert!(!with(Auto, true, &both), "no colour outranks");
        assert!(with(Always, false, &both), "the option outranks all");
        assert!(!with(Never, true, &[("CLICOLOR_FORCE", "1")]), "likewise");
    }
}
