//! Values of parameters: global, subcircuit default, instance. Evaluated when asked for,
//! each once, without recursion, so that a chain of any length is followed and a cycle is named.

use super::issue::{Issue, IssueKind};
use super::names::{Folded, nearest};
use super::program::{Definition, Program, ScopeId};
use crate::syntax::Value;
use crate::syntax::expr::{self, Expr};
use crate::text::{FileId, Span, TextRange};
use crate::units::parse_number;
use std::cell::RefCell;
use std::collections::HashMap;
use std::rc::Rc;

/// What is known of a parameter's value.
#[derive(Clone, Copy, Debug)]
enum Slot {
    /// What it depends on is being looked up.
    Busy,
    /// Looked up; `None` when it has no value.
    Known(Option<f64>),
}

/// The parameters in force in one instance of a scope.
#[derive(Debug)]
pub struct Env {
    scope: ScopeId,
    parent: Option<Rc<Env>>,
    overrides: HashMap<Folded, f64>,
    values: RefCell<HashMap<Folded, Slot>>,
}

impl Env {
    /// Parameters of `scope` inside `parent`, with the instance's own values over the defaults.
    pub fn new(
        scope: ScopeId,
        parent: Option<Rc<Env>>,
        overrides: HashMap<Folded, f64>,
    ) -> Rc<Self> {
        Rc::new(Self {
            scope,
            parent,
            overrides,
            values: RefCell::new(HashMap::new()),
        })
    }

    /// The scope.
    pub fn scope(&self) -> ScopeId {
        self.scope
    }

    /// The nearest environment, this one or around it, of a scope.
    pub fn of_scope(self: &Rc<Self>, scope: ScopeId) -> Option<Rc<Env>> {
        let mut next = Some(Rc::clone(self));
        while let Some(env) = next {
            if env.scope == scope {
                return Some(env);
            }
            next = env.parent.clone();
        }
        None
    }

    /// Value of a value field. Faults go to `issues`; the answer is then `None`.
    pub fn value(
        self: &Rc<Self>,
        program: &Program,
        file: FileId,
        value: Value,
        issues: &mut Vec<Issue>,
    ) -> Option<f64> {
        self.text_value(program, file, value.range, value.quoted, issues)
    }

    /// Value of a range of text that holds a number, a name or an expression.
    pub fn text_value(
        self: &Rc<Self>,
        program: &Program,
        file: FileId,
        range: TextRange,
        quoted: bool,
        issues: &mut Vec<Issue>,
    ) -> Option<f64> {
        let text = program.text(file, range);
        let value = match parse_number(text) {
            Ok(number) if !quoted => number.value,
            _ => {
                let (inner, shift) = if quoted {
                    (text.get(1..text.len().saturating_sub(1))?, 1)
                } else {
                    (text, 0)
                };
                // A text that cannot be read is reported by the parser.
                let compiled = expr::compile(inner).ok()?;
                let place = Place {
                    file,
                    start: range.start + shift,
                };
                self.eval(program, &compiled, place, issues)?
            }
        };
        if !value.is_finite() {
            issues.push(Issue {
                kind: IssueKind::ValueNotFinite {
                    text: text.to_owned(),
                },
                span: Span::new(file, range),
                other: None,
            });
            return None;
        }
        Some(value)
    }

    fn eval(
        self: &Rc<Self>,
        program: &Program,
        compiled: &Expr,
        place: Place,
        issues: &mut Vec<Issue>,
    ) -> Option<f64> {
        for (name, at) in compiled.names() {
            self.resolve(program, name, place.of(*at, name), issues);
        }
        let mut lookup = |name: &str| self.known(program, &Folded::new(name)).flatten();
        // An unknown name has been reported while resolving.
        compiled.eval(&mut lookup).ok()
    }

    /// The environment that defines a name, from here outward.
    fn owner(self: &Rc<Self>, program: &Program, name: &Folded) -> Option<Rc<Env>> {
        let mut next = Some(Rc::clone(self));
        while let Some(env) = next {
            let defined = program
                .scope(env.scope)
                .is_some_and(|scope| scope.params.contains_key(name));
            if defined || env.overrides.contains_key(name) {
                return Some(env);
            }
            next = env.parent.clone();
        }
        None
    }

    /// A value that is at hand: `Some(None)` when it is known to have none.
    fn known(self: &Rc<Self>, program: &Program, name: &Folded) -> Option<Option<f64>> {
        let owner = self.owner(program, name)?;
        if let Some(value) = owner.overrides.get(name) {
            return Some(Some(*value));
        }
        match owner.values.borrow().get(name) {
            Some(Slot::Known(value)) => Some(*value),
            _ => None,
        }
    }

    /// Makes a name's value known, following what it depends on depth first.
    fn resolve(
        self: &Rc<Self>,
        program: &Program,
        name: &str,
        span: Span,
        issues: &mut Vec<Issue>,
    ) {
        let mut stack: Vec<Pending> = Vec::new();
        self.enter(program, name, span, &mut stack, issues);
        while let Some(top) = stack.last_mut() {
            if let Some((name, at)) = top.compiled.names().get(top.next).cloned() {
                top.next += 1;
                let env = Rc::clone(&top.env);
                let span = top.place.of(at, &name);
                env.enter(program, &name, span, &mut stack, issues);
                continue;
            }
            let Some(done) = stack.pop() else { return };
            let env = &done.env;
            let value = done
                .compiled
                .eval(&mut |name| env.known(program, &Folded::new(name)).flatten())
                .ok();
            env.set(done.name, value);
        }
    }

    /// Puts a name on the stack unless its value is known; reports unknown names and cycles.
    fn enter(
        self: &Rc<Self>,
        program: &Program,
        name: &str,
        span: Span,
        stack: &mut Vec<Pending>,
        issues: &mut Vec<Issue>,
    ) {
        let folded = Folded::new(name);
        if self.known(program, &folded).is_some() || is_constant(name) {
            return;
        }
        let Some(owner) = self.owner(program, &folded) else {
            issues.push(self.unknown(program, name, span));
            return;
        };
        let busy = matches!(owner.values.borrow().get(&folded), Some(Slot::Busy));
        if busy {
            let same =
                |pending: &Pending| pending.name == folded && Rc::ptr_eq(&pending.env, &owner);
            let from = stack.iter().position(same).unwrap_or(0);
            let cycle = stack.get(from..).unwrap_or_default();
            let names = cycle.iter().map(|p| p.name.as_str().to_owned()).collect();
            let place = cycle.first().map_or(span, |pending| pending.defined);
            issues.push(Issue {
                kind: IssueKind::ParameterCycle { names },
                span: place,
                other: Some(span),
            });
            owner.set(folded, None);
            return;
        }
        let definition = program
            .scope(owner.scope)
            .and_then(|scope| scope.params.get(&folded));
        let pending = definition.and_then(|def| Pending::new(program, &owner, &folded, def));
        match pending {
            Some(pending) => {
                owner.values.borrow_mut().insert(folded, Slot::Busy);
                stack.push(pending);
            }
            None => owner.set(folded, None),
        }
    }

    fn set(&self, name: Folded, value: Option<f64>) {
        self.values.borrow_mut().insert(name, Slot::Known(value));
    }

    fn unknown(self: &Rc<Self>, program: &Program, name: &str, span: Span) -> Issue {
        let known: Vec<&str> = program
            .outward(self.scope)
            .flat_map(|scope| scope.param_order.iter().map(Folded::as_str))
            .collect();
        Issue {
            kind: IssueKind::UnknownParameter {
                name: name.to_owned(),
                nearest: nearest(name, known).map(str::to_owned),
            },
            span,
            other: None,
        }
    }
}

fn is_constant(name: &str) -> bool {
    name.eq_ignore_ascii_case("pi")
}

/// Where an expression's text starts.
#[derive(Clone, Copy)]
struct Place {
    file: FileId,
    start: u32,
}

impl Place {
    fn of(self, at: u32, name: &str) -> Span {
        let start = self.start + at;
        Span::new(self.file, TextRange::new(start, start + name.len() as u32))
    }
}

/// A definition whose names are being resolved.
struct Pending {
    env: Rc<Env>,
    name: Folded,
    compiled: Expr,
    place: Place,
    defined: Span,
    next: usize,
}

impl Pending {
    fn new(
        program: &Program,
        env: &Rc<Env>,
        name: &Folded,
        definition: &Definition,
    ) -> Option<Self> {
        let value = definition.def.value;
        let text = program.text(definition.file, value.range);
        let (inner, shift) = if value.quoted {
            (text.get(1..text.len().saturating_sub(1))?, 1)
        } else {
            (text, 0)
        };
        Some(Self {
            env: Rc::clone(env),
            name: name.clone(),
            compiled: expr::compile(inner).ok()?,
            place: Place {
                file: definition.file,
                start: value.range.start + shift,
            },
            defined: Span::new(definition.file, definition.def.name.range),
            next: 0,
        })
    }
}
