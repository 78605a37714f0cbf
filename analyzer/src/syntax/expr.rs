//! Parameter expressions: compiled to postfix once, evaluated against a lookup.
//! No recursion anywhere, so neither depth nor length of an expression can exhaust the stack.
//!
//! Operators by falling strength: `^` and `**` (right to left), sign and `!`, `* / %`, `+ -`,
//! comparisons, `== !=`, `&&`, `||`, `? :`. Functions as in IBIS-ISS 1.0 (IBIS Open Forum,
//! 2011): `log` is the natural logarithm.

use super::functions::{binary_function, unary_function};
use crate::units::parse_number_prefix;

/// Why an expression cannot be read, and where in it.
#[derive(Clone, PartialEq, Eq, Debug)]
pub struct ExprFault {
    /// Byte position in the expression's text.
    pub at: u32,
    /// What is wrong.
    pub kind: ExprFaultKind,
}

/// What can be wrong with an expression.
#[derive(Clone, PartialEq, Eq, Debug)]
#[non_exhaustive]
pub enum ExprFaultKind {
    /// A value was expected.
    ValueExpected,
    /// An operator was expected.
    OperatorExpected,
    /// A sign that has no meaning in an expression.
    UnexpectedSign(char),
    /// A parenthesis without its partner.
    UnpairedParenthesis,
    /// `? :` do not pair.
    UnpairedChoice,
    /// No such function, or not with so many arguments.
    UnknownFunction(String),
}

impl std::fmt::Display for ExprFault {
    fn fmt(&self, f: &mut std::fmt::Formatter<'_>) -> std::fmt::Result {
        match &self.kind {
            ExprFaultKind::ValueExpected => f.write_str("a value is missing"),
            ExprFaultKind::OperatorExpected => f.write_str("an operator is missing"),
            ExprFaultKind::UnexpectedSign(sign) => write!(f, "`{sign}` has no meaning here"),
            ExprFaultKind::UnpairedParenthesis => f.write_str("parentheses do not pair"),
            ExprFaultKind::UnpairedChoice => f.write_str("`?` and `:` do not pair"),
            ExprFaultKind::UnknownFunction(name) => {
                write!(f, "no function `{name}` with these arguments")
            }
        }
    }
}

/// A compiled expression.
#[derive(Clone, Debug)]
pub struct Expr {
    ops: Vec<Op>,
    /// Names that are looked up, with their byte position in the text.
    names: Vec<(String, u32)>,
}

#[derive(Clone, Copy, Debug)]
enum Op {
    Number(f64),
    Name(u32),
    Unary(Unary),
    Binary(Binary),
    Choose,
    Clamp,
}

#[derive(Clone, Copy, Debug)]
enum Unary {
    Minus,
    Not,
    Function(fn(f64) -> f64),
}

#[derive(Clone, Copy, Debug)]
enum Binary {
    Add,
    Subtract,
    Multiply,
    Divide,
    Remainder,
    Power,
    Less,
    LessEqual,
    Greater,
    GreaterEqual,
    Equal,
    NotEqual,
    And,
    Or,
    Function(fn(f64, f64) -> f64),
}

/// A name that has no value, with its byte position in the expression's text.
#[derive(Clone, PartialEq, Eq, Debug)]
pub struct UnknownName {
    /// The name as written.
    pub name: String,
    /// Byte position.
    pub at: u32,
}

impl Expr {
    /// The names the expression looks up, with byte positions.
    pub fn names(&self) -> &[(String, u32)] {
        &self.names
    }

    /// Value of the expression; `lookup` gets each name as written.
    ///
    /// # Errors
    /// The first name for which `lookup` has no value.
    pub fn eval(&self, lookup: &mut dyn FnMut(&str) -> Option<f64>) -> Result<f64, UnknownName> {
        let mut stack: Vec<f64> = Vec::with_capacity(8);
        for op in &self.ops {
            let value = match *op {
                Op::Number(value) => value,
                Op::Name(index) => {
                    let Some((name, at)) = self.names.get(index as usize) else {
                        continue;
                    };
                    match lookup(name).or_else(|| constant(name)) {
                        Some(value) => value,
                        None => {
                            return Err(UnknownName {
                                name: name.clone(),
                                at: *at,
                            });
                        }
                    }
                }
                Op::Unary(unary) => apply_unary(unary, stack.pop().unwrap_or(f64::NAN)),
                Op::Binary(binary) => {
                    let right = stack.pop().unwrap_or(f64::NAN);
                    let left = stack.pop().unwrap_or(f64::NAN);
                    apply_binary(binary, left, right)
                }
                Op::Choose => {
                    let no = stack.pop().unwrap_or(f64::NAN);
                    let yes = stack.pop().unwrap_or(f64::NAN);
                    let condition = stack.pop().unwrap_or(f64::NAN);
                    if condition != 0.0 { yes } else { no }
                }
                Op::Clamp => {
                    let high = stack.pop().unwrap_or(f64::NAN);
                    let low = stack.pop().unwrap_or(f64::NAN);
                    stack.pop().unwrap_or(f64::NAN).max(low).min(high)
                }
            };
            stack.push(value);
        }
        Ok(stack.pop().unwrap_or(f64::NAN))
    }
}

fn constant(name: &str) -> Option<f64> {
    name.eq_ignore_ascii_case("pi")
        .then_some(std::f64::consts::PI)
}

fn truth(condition: bool) -> f64 {
    f64::from(u8::from(condition))
}

fn apply_unary(unary: Unary, value: f64) -> f64 {
    match unary {
        Unary::Minus => -value,
        Unary::Not => truth(value == 0.0),
        Unary::Function(function) => function(value),
    }
}

fn apply_binary(binary: Binary, left: f64, right: f64) -> f64 {
    match binary {
        Binary::Add => left + right,
        Binary::Subtract => left - right,
        Binary::Multiply => left * right,
        Binary::Divide => left / right,
        Binary::Remainder => left % right,
        Binary::Power => left.powf(right),
        Binary::Less => truth(left < right),
        Binary::LessEqual => truth(left <= right),
        Binary::Greater => truth(left > right),
        Binary::GreaterEqual => truth(left >= right),
        Binary::Equal => truth(left == right),
        Binary::NotEqual => truth(left != right),
        Binary::And => truth(left != 0.0 && right != 0.0),
        Binary::Or => truth(left != 0.0 || right != 0.0),
        Binary::Function(function) => function(left, right),
    }
}

/// What waits on the operator stack (Dijkstra's shunting yard, 1961, from memory).
enum Waiting {
    Unary(Unary),
    Binary(Binary),
    Open(u32),
    Call {
        name: String,
        at: u32,
        arguments: usize,
    },
    Question(u32),
    Choice,
}

/// Compiles an expression's text (without its quotes). A line break followed by `+` inside it
/// is a continuation and counts as a blank.
///
/// # Errors
/// See [`ExprFaultKind`]; the position is a byte offset in `text`.
pub fn compile(text: &str) -> Result<Expr, ExprFault> {
    let mut compiler = Compiler {
        text,
        at: 0,
        ops: Vec::new(),
        names: Vec::new(),
        waiting: Vec::new(),
        value_next: true,
    };
    while compiler.step()? {}
    compiler.finish()
}

struct Compiler<'t> {
    text: &'t str,
    at: usize,
    ops: Vec<Op>,
    names: Vec<(String, u32)>,
    waiting: Vec<Waiting>,
    value_next: bool,
}

impl Compiler<'_> {
    fn fault<T>(&self, kind: ExprFaultKind) -> Result<T, ExprFault> {
        Err(ExprFault {
            at: self.at.min(self.text.len()) as u32,
            kind,
        })
    }

    fn rest(&self) -> &str {
        self.text.get(self.at..).unwrap_or("")
    }

    fn skip_blank(&mut self) {
        loop {
            let rest = self.rest();
            let blank = rest.len() - rest.trim_start().len();
            let broke = rest[..blank].contains(['\n', '\r']);
            self.at += blank;
            if broke && self.rest().starts_with('+') {
                self.at += 1;
            } else {
                return;
            }
        }
    }

    /// Takes one sign or value; `false` at the end.
    fn step(&mut self) -> Result<bool, ExprFault> {
        self.skip_blank();
        let Some(first) = self.rest().chars().next() else {
            return Ok(false);
        };
        if self.value_next {
            self.value(first)?;
        } else {
            self.operator(first)?;
        }
        Ok(true)
    }

    fn value(&mut self, first: char) -> Result<(), ExprFault> {
        match first {
            '(' => {
                self.waiting.push(Waiting::Open(self.at as u32));
                self.at += 1;
            }
            '-' => {
                self.at += 1;
                self.waiting.push(Waiting::Unary(Unary::Minus));
            }
            '+' => self.at += 1,
            '!' => {
                self.at += 1;
                self.waiting.push(Waiting::Unary(Unary::Not));
            }
            '0'..='9' | '.' => match parse_number_prefix(self.rest()) {
                Ok((number, used)) => {
                    self.ops.push(Op::Number(number.value));
                    self.at += used;
                    self.value_next = false;
                }
                Err(_) => return self.fault(ExprFaultKind::ValueExpected),
            },
            c if c.is_alphabetic() || c == '_' => self.name(),
            ')' if self.empty_call() => {
                self.close()?;
            }
            _ => return self.fault(ExprFaultKind::ValueExpected),
        }
        Ok(())
    }

    fn empty_call(&self) -> bool {
        matches!(
            self.waiting.last(),
            Some(Waiting::Call { arguments: 1, .. })
        ) && self.text[..self.at].trim_end().ends_with('(')
    }

    fn name(&mut self) {
        let rest = self.rest();
        let length = rest
            .find(|c: char| !(c.is_alphanumeric() || matches!(c, '_' | '.' | '#' | '@')))
            .unwrap_or(rest.len());
        let name = rest[..length].to_owned();
        let at = self.at as u32;
        self.at += length;
        if self.rest().starts_with('(') {
            self.at += 1;
            self.waiting.push(Waiting::Call {
                name,
                at,
                arguments: 1,
            });
        } else {
            self.ops.push(Op::Name(self.names.len() as u32));
            self.names.push((name, at));
            self.value_next = false;
        }
    }

    fn operator(&mut self, first: char) -> Result<(), ExprFault> {
        match first {
            ')' => return self.close(),
            ',' => return self.comma(),
            '?' => {
                self.unwind(1, false);
                self.waiting.push(Waiting::Question(self.at as u32));
                self.at += 1;
                self.value_next = true;
                return Ok(());
            }
            ':' => return self.colon(),
            _ => {}
        }
        let Some((binary, length)) = binary_operator(self.rest()) else {
            let unknown = first.is_alphanumeric() || matches!(first, '(' | '_' | '.');
            return self.fault(if unknown {
                ExprFaultKind::OperatorExpected
            } else {
                ExprFaultKind::UnexpectedSign(first)
            });
        };
        self.unwind(strength(binary), matches!(binary, Binary::Power));
        self.waiting.push(Waiting::Binary(binary));
        self.at += length;
        self.value_next = true;
        Ok(())
    }

    /// Emits waiting operators at least as strong as `strength` (stronger only, when the new
    /// operator groups from the right).
    fn unwind(&mut self, least: u8, from_right: bool) {
        while let Some(top) = self.waiting.last() {
            let top_strength = match top {
                Waiting::Unary(_) => 8,
                Waiting::Binary(binary) => strength(*binary),
                Waiting::Choice => 0,
                _ => return,
            };
            if top_strength < least || (from_right && top_strength == least) {
                return;
            }
            self.emit_top();
        }
    }

    fn emit_top(&mut self) {
        match self.waiting.pop() {
            Some(Waiting::Unary(unary)) => self.ops.push(Op::Unary(unary)),
            Some(Waiting::Binary(binary)) => self.ops.push(Op::Binary(binary)),
            Some(Waiting::Choice) => self.ops.push(Op::Choose),
            Some(other) => self.waiting.push(other),
            None => {}
        }
    }

    fn close(&mut self) -> Result<(), ExprFault> {
        self.unwind(0, false);
        match self.waiting.pop() {
            Some(Waiting::Open(_)) => {}
            Some(Waiting::Call {
                name,
                at,
                arguments,
            }) => {
                let given = if self.value_next { 0 } else { arguments };
                if !self.emit_call(&name, given) {
                    self.at = at as usize;
                    return self.fault(ExprFaultKind::UnknownFunction(name));
                }
            }
            Some(Waiting::Question(_)) => return self.fault(ExprFaultKind::UnpairedChoice),
            _ => return self.fault(ExprFaultKind::UnpairedParenthesis),
        }
        self.at += 1;
        self.value_next = false;
        Ok(())
    }

    fn comma(&mut self) -> Result<(), ExprFault> {
        self.unwind(0, false);
        match self.waiting.last_mut() {
            Some(Waiting::Call { arguments, .. }) => *arguments += 1,
            _ => return self.fault(ExprFaultKind::UnexpectedSign(',')),
        }
        self.at += 1;
        self.value_next = true;
        Ok(())
    }

    fn colon(&mut self) -> Result<(), ExprFault> {
        self.unwind(0, false);
        match self.waiting.pop() {
            Some(Waiting::Question(_)) => self.waiting.push(Waiting::Choice),
            _ => return self.fault(ExprFaultKind::UnpairedChoice),
        }
        self.at += 1;
        self.value_next = true;
        Ok(())
    }

    fn emit_call(&mut self, name: &str, arguments: usize) -> bool {
        let lower = name.to_ascii_lowercase();
        match arguments {
            1 => unary_function(&lower).map(|f| self.ops.push(Op::Unary(Unary::Function(f)))),
            2 => binary_function(&lower).map(|f| self.ops.push(Op::Binary(Binary::Function(f)))),
            3 if lower == "if" => {
                self.ops.push(Op::Choose);
                Some(())
            }
            3 if lower == "limit" => {
                self.ops.push(Op::Clamp);
                Some(())
            }
            _ => None,
        }
        .is_some()
    }

    fn finish(mut self) -> Result<Expr, ExprFault> {
        if self.value_next {
            return self.fault(ExprFaultKind::ValueExpected);
        }
        self.unwind(0, false);
        match self.waiting.last() {
            None => Ok(Expr {
                ops: self.ops,
                names: self.names,
            }),
            Some(Waiting::Question(at)) => {
                self.at = *at as usize;
                self.fault(ExprFaultKind::UnpairedChoice)
            }
            Some(Waiting::Open(at) | Waiting::Call { at, .. }) => {
                self.at = *at as usize;
                self.fault(ExprFaultKind::UnpairedParenthesis)
            }
            Some(_) => self.fault(ExprFaultKind::ValueExpected),
        }
    }
}

fn binary_operator(text: &str) -> Option<(Binary, usize)> {
    let two = text.get(..2).unwrap_or("");
    let found = match two {
        "**" => (Binary::Power, 2),
        "<=" => (Binary::LessEqual, 2),
        ">=" => (Binary::GreaterEqual, 2),
        "==" => (Binary::Equal, 2),
        "!=" => (Binary::NotEqual, 2),
        "&&" => (Binary::And, 2),
        "||" => (Binary::Or, 2),
        _ => match text.chars().next()? {
            '+' => (Binary::Add, 1),
            '-' => (Binary::Subtract, 1),
            '*' => (Binary::Multiply, 1),
            '/' => (Binary::Divide, 1),
            '%' => (Binary::Remainder, 1),
            '^' => (Binary::Power, 1),
            '<' => (Binary::Less, 1),
            '>' => (Binary::Greater, 1),
            _ => return None,
        },
    };
    Some(found)
}

/// Binding strength; a sign (8) binds weaker than a power (9): `-2^2` is -4.
fn strength(binary: Binary) -> u8 {
    match binary {
        Binary::Power => 9,
        Binary::Multiply | Binary::Divide | Binary::Remainder => 7,
        Binary::Add | Binary::Subtract => 6,
        Binary::Less | Binary::LessEqual | Binary::Greater | Binary::GreaterEqual => 5,
        Binary::Equal | Binary::NotEqual => 4,
        Binary::And => 3,
        Binary::Or => 2,
        Binary::Function(_) => 10,
    }
}

#[cfg(test)]
mod tests {
    use super::*;

    fn value(text: &str) -> f64 {
        let expr = compile(text).unwrap_or_else(|fault| panic!("{text}: {fault:?}"));
        expr.eval(&mut |name| match name {
            "a" => Some(3.0),
            "rload" => Some(50.0),
            _ => None,
        })
        .unwrap_or(f64::NAN)
    }

    #[test]
    fn arithmetic_as_written_on_paper() {
        for (text, expected) in [
            ("1+2*3", 7.0),
            ("(1+2)*3", 9.0),
            ("-2^2", -4.0),
            ("2**3**2", 512.0),
            ("2^-1", 0.5),
            ("6/2/3", 1.0),
            ("2k+0.2meg", 202_000.0),
            ("a*rload", 150.0),
            ("a > 2 ? 10p : 20p", 10e-12),
            ("a < 2 ? 1 : a < 4 ? 2 : 3", 2.0),
            ("1 + (a==3 && !0 ? 1 : 0)", 2.0),
            ("max(1, min(a, 2)) + sqrt(16)", 6.0),
            ("limit(a, 0, 2)", 2.0),
            ("limit(-1, 0, 2)", 0.0),
            ("if(a>5, 1, 2)", 2.0),
            ("1\n+ + 2", 3.0),
            ("db(0.1)", -20.0),
            ("db(10)", 20.0),
        ] {
            assert_eq!(value(text), expected, "{text}");
        }
        assert!((value("cos(pi)") + 1.0).abs() < 1e-15, "pi is known");
    }

    #[test]
    fn faults_have_places() {
        for (text, at) in [
            ("1+", 2),
            ("1 2", 2),
            ("(1+2", 0),
            ("1+2)", 3),
            ("1 ? 2", 2),
            ("nofunction(1)", 0),
            ("1 # 2", 2),
            ("", 0),
            ("1 : 2", 2),
        ] {
            let fault = compile(text).err();
            assert_eq!(fault.map(|f| f.at), Some(at), "{text}");
        }
        let unknown = compile("2*nosuch").map(|e| e.eval(&mut |_| None));
        assert_eq!(
            unknown,
            Ok(Err(UnknownName {
                name: "nosuch".into(),
                at: 2
            }))
        );
    }

    #[test]
    fn depth_and_length_do_not_matter() {
        let deep = format!("{}1{}", "(".repeat(100_000), ")".repeat(100_000));
        assert_eq!(value(&deep), 1.0);
        let long = format!("0{}", "+1".repeat(100_000));
        assert_eq!(value(&long), 100_000.0);
        let signs = format!("{}1", "-".repeat(100_000));
        assert_eq!(value(&signs), 1.0);
    }
}
