//! The functions that an expression may call, as in IBIS-ISS 1.0 (IBIS Open Forum, 2011).

/// A function of one argument by its lower-case name.
pub(super) fn unary_function(name: &str) -> Option<fn(f64) -> f64> {
    let function: fn(f64) -> f64 = match name {
        "abs" => f64::abs,
        "sqrt" => f64::sqrt,
        "exp" => f64::exp,
        "ln" | "log" => f64::ln,
        "log10" => f64::log10,
        "db" => |x| 20.0 * x.abs().log10(),
        "sin" => f64::sin,
        "cos" => f64::cos,
        "tan" => f64::tan,
        "asin" => f64::asin,
        "acos" => f64::acos,
        "atan" => f64::atan,
        "sinh" => f64::sinh,
        "cosh" => f64::cosh,
        "tanh" => f64::tanh,
        "int" => f64::trunc,
        "nint" | "round" => f64::round,
        "floor" => f64::floor,
        "ceil" => f64::ceil,
        "sgn" => |x| if x == 0.0 { 0.0 } else { x.signum() },
        _ => return None,
    };
    Some(function)
}

/// A function of two arguments by its lower-case name.
pub(super) fn binary_function(name: &str) -> Option<fn(f64, f64) -> f64> {
    let function: fn(f64, f64) -> f64 = match name {
        "min" => f64::min,
        "max" => f64::max,
        "pow" => f64::powf,
        "pwr" => |x, y| x.abs().powf(y).copysign(x),
        "atan2" => f64::atan2,
        "sign" => |x, y| x.abs().copysign(y),
        _ => return None,
    };
    Some(function)
}
