//! Number literals of netlists: `4.7k`, `2.2meg`, `10pF`, `1e-12`, `4k7`.
//!
//! The scale factors are t g meg x k m u n p f a and mil, in any case; `M` is milli
//! (IBIS-ISS 1.0, IBIS Open Forum, 2011, "Numbers"; `a` and `x` are common practice).
//! Letters after the factor are a unit and carry no meaning.

/// A number literal that was read.
#[derive(Clone, Copy, PartialEq, Debug)]
pub struct Number {
    /// The value in SI units, correctly rounded from the decimal text.
    pub value: f64,
    /// The byte position of the scale letter within the literal, if there is one.
    pub scale_at: Option<u32>,
    /// Written with the factor in place of the decimal point, as `4k7`.
    pub infix: bool,
}

/// Why a text is not a number.
#[derive(Clone, Copy, PartialEq, Eq, Debug)]
#[non_exhaustive]
pub enum NumberFault {
    /// Does not start like a number.
    NotANumber,
    /// Starts like one, but other characters follow.
    TrailingCharacters,
    /// Too large for a double.
    OutOfRange,
}

/// Reads a whole text as a number literal.
///
/// # Errors
/// See [`NumberFault`].
pub fn parse_number(text: &str) -> Result<Number, NumberFault> {
    let (number, used) = parse_number_prefix(text)?;
    if used < text.len() {
        return Err(NumberFault::TrailingCharacters);
    }
    Ok(number)
}

/// Reads the number literal at the start of `text`; also returns how many bytes it takes
/// (the unit letters behind it included).
///
/// # Errors
/// [`NumberFault::NotANumber`] or [`NumberFault::OutOfRange`].
pub fn parse_number_prefix(text: &str) -> Result<(Number, usize), NumberFault> {
    let bytes = text.as_bytes();
    let mantissa_end = mantissa(bytes).ok_or(NumberFault::NotANumber)?;
    let (exponent, number_end) = exponent(bytes, mantissa_end);
    let digits = &text[..mantissa_end];
    let (scale, scale_length) = scale_factor(&text[number_end..]);
    let after_scale = number_end + scale_length;
    if scale_length > 0
        && exponent == 0
        && !digits.contains('.')
        && let Some(found) = infix_number(text, digits, scale, after_scale)
    {
        return found;
    }
    let unit = unit_length(&text[after_scale..]);
    let value = decimal(digits, exponent, scale)?;
    let number = Number {
        value,
        scale_at: (scale_length > 0).then_some(number_end as u32),
        infix: false,
    };
    Ok((number, after_scale + unit))
}

/// `4k7`: digits, one factor, digits. `None` when no digit follows the factor.
fn infix_number(
    text: &str,
    digits: &str,
    scale: Scale,
    after_scale: usize,
) -> Option<Result<(Number, usize), NumberFault>> {
    let tail = &text[after_scale..];
    let fraction = tail.bytes().take_while(u8::is_ascii_digit).count();
    if fraction == 0 {
        return None;
    }
    let end = after_scale + fraction;
    let whole = format!("{digits}.{}", &tail[..fraction]);
    let unit = unit_length(&text[end..]);
    Some(decimal(&whole, 0, scale).map(|value| {
        let number = Number {
            value,
            scale_at: Some(digits.len() as u32),
            infix: true,
        };
        (number, end + unit)
    }))
}

/// A scale factor: a power of ten, or the mil (25.4e-6).
#[derive(Clone, Copy)]
enum Scale {
    Power(i32),
    Mil,
}

/// The factor at the start of `text` and its length in bytes.
fn scale_factor(text: &str) -> (Scale, usize) {
    let starts = |word: &str| {
        text.get(..word.len())
            .is_some_and(|t| t.eq_ignore_ascii_case(word))
    };
    if starts("meg") {
        return (Scale::Power(6), 3);
    }
    if starts("mil") {
        return (Scale::Mil, 3);
    }
    let Some(first) = text.chars().next() else {
        return (Scale::Power(0), 0);
    };
    let power = match first.to_ascii_lowercase() {
        't' => 12,
        'g' => 9,
        'x' => 6,
        'k' => 3,
        'm' => -3,
        'u' | '\u{B5}' | '\u{3BC}' => -6,
        'n' => -9,
        'p' => -12,
        'f' => -15,
        'a' => -18,
        _ => return (Scale::Power(0), 0),
    };
    (Scale::Power(power), first.len_utf8())
}

/// End of sign, digits and point; `None` without a digit.
fn mantissa(bytes: &[u8]) -> Option<usize> {
    let mut at = usize::from(matches!(bytes.first(), Some(b'+' | b'-')));
    let mut digits = 0;
    let mut point = false;
    while let Some(&byte) = bytes.get(at) {
        match byte {
            b'0'..=b'9' => digits += 1,
            b'.' if !point => point = true,
            _ => break,
        }
        at += 1;
    }
    (digits > 0).then_some(at)
}

/// The power of ten written with `e`, and where it ends.
fn exponent(bytes: &[u8], from: usize) -> (i32, usize) {
    if !matches!(bytes.get(from), Some(b'e' | b'E')) {
        return (0, from);
    }
    let negative = matches!(bytes.get(from + 1), Some(b'-'));
    let signed = matches!(bytes.get(from + 1), Some(b'+' | b'-'));
    let start = from + 1 + usize::from(signed);
    let digits = bytes
        .get(start..)
        .unwrap_or_default()
        .iter()
        .take_while(|b| b.is_ascii_digit())
        .count();
    if digits == 0 {
        return (0, from);
    }
    let magnitude = bytes[start..start + digits]
        .iter()
        .fold(0i32, |sum, b| (sum * 10 + i32::from(b - b'0')).min(99_999));
    let power = if negative { -magnitude } else { magnitude };
    (power, start + digits)
}

/// Length of the unit letters (and a few signs used in units) at the start of `text`.
fn unit_length(text: &str) -> usize {
    text.char_indices()
        .find(|(_, c)| !(c.is_alphabetic() || matches!(c, '%' | '\u{2126}' | '_')))
        .map_or(text.len(), |(at, _)| at)
}

/// Digits times a power of ten, rounded once.
fn decimal(digits: &str, exponent: i32, scale: Scale) -> Result<f64, NumberFault> {
    let power = match scale {
        Scale::Power(power) => exponent + power,
        Scale::Mil => exponent,
    };
    let value: f64 = if power == 0 {
        digits.parse()
    } else {
        format!("{digits}e{power}").parse()
    }
    .map_err(|_| NumberFault::NotANumber)?;
    let value = match scale {
        Scale::Power(_) => value,
        Scale::Mil => value * 25.4e-6,
    };
    if value.is_finite() {
        Ok(value)
    } else {
        Err(NumberFault::OutOfRange)
    }
}

#[cfg(test)]
mod tests {
    use super::*;

    fn value(text: &str) -> f64 {
        parse_number(text).map_or(f64::NAN, |number| number.value)
    }

    #[test]
    fn every_scale_factor_in_any_case() {
        for (text, expected) in [
            ("1t", 1e12),
            ("1G", 1e9),
            ("2.2meg", 2.2e6),
            ("2.2MEG", 2.2e6),
            ("1x", 1e6),
            ("4.7k", 4.7e3),
            ("1M", 1e-3),
            ("1m", 1e-3),
            ("3u", 3e-6),
            ("3\u{B5}F", 3e-6),
            ("3n", 3e-9),
            ("10pF", 1e-11),
            ("1f", 1e-15),
            ("1F", 1e-15),
            ("1a", 1e-18),
            ("1mil", 25.4e-6),
            ("4.7kOhm", 4.7e3),
            ("50ohm", 50.0),
            ("1e-12", 1e-12),
            ("1.5e3k", 1.5e6),
            ("-.5", -0.5),
            ("+3.", 3.0),
            ("1eV", 1.0),
            ("100Hz", 100.0),
        ] {
            assert_eq!(value(text), expected, "{text}");
        }
    }

    #[test]
    fn values_are_rounded_once() {
        // 6.8e-12 as a double, not 6.8 * 1e-12.
        assert_eq!(value("6.8p"), 6.8e-12);
        assert_eq!(value("0.1u"), 0.1e-6);
    }

    #[test]
    fn infix_factor() {
        let number = parse_number("4k7").ok();
        assert_eq!(number.map(|n| (n.value, n.infix)), Some((4.7e3, true)));
        assert_eq!(value("2p2F"), 2.2e-12);
    }

    #[test]
    fn faults() {
        assert_eq!(parse_number("abc"), Err(NumberFault::NotANumber));
        assert_eq!(parse_number(""), Err(NumberFault::NotANumber));
        assert_eq!(parse_number("-"), Err(NumberFault::NotANumber));
        assert_eq!(parse_number("1k*2"), Err(NumberFault::TrailingCharacters));
        assert_eq!(parse_number("1e999"), Err(NumberFault::OutOfRange));
        assert_eq!(parse_number("1..2"), Err(NumberFault::TrailingCharacters));
    }
}
