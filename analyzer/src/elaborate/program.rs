//! All statements of a netlist and its includes, sorted into scopes. Includes are spliced
//! where they stand; what is not there yet is asked for.

use super::flatten::Gap;
use super::issue::{Issue, IssueKind, LimitKey};
use super::names::Folded;
use crate::syntax::{
    Dot, IncludePath, Param, ParamDef, Parse, StatementKind, SyntaxErrorKind, Word,
};
use crate::text::{FileId, Span, TextRange};
use std::collections::{BTreeMap, HashMap};
use std::sync::Arc;

/// Gives parsed files by number, and answers includes.
pub trait FileStore {
    /// A parsed file.
    fn file(&self, file: FileId) -> Option<Arc<Parse>>;
    /// What an include in `from` leads to.
    fn include(&self, from: FileId, path: &str) -> Include;
}

/// The answer to an include.
#[derive(Clone, PartialEq, Eq, Debug)]
pub enum Include {
    /// The file is there.
    File(FileId),
    /// It will not be had; the reason in words.
    Refused(String),
    /// Nobody has asked for it yet.
    Unknown,
}

/// An include that the store did not know.
#[derive(Clone, PartialEq, Eq, PartialOrd, Ord, Hash, Debug)]
pub struct IncludeRequest {
    /// The file that asks.
    pub from: FileId,
    /// The path as written.
    pub path: String,
}

/// A scope by number; 0 is the top.
#[derive(Clone, Copy, PartialEq, Eq, PartialOrd, Ord, Hash, Debug)]
pub struct ScopeId(pub u32);

/// A statement by file and index.
#[derive(Clone, Copy, PartialEq, Eq, PartialOrd, Ord, Hash, Debug)]
pub struct CardRef {
    /// The file.
    pub file: FileId,
    /// Index in the file's statements.
    pub statement: u32,
}

/// A parameter definition with its file.
#[derive(Clone, PartialEq, Debug)]
pub struct Definition {
    /// The file.
    pub file: FileId,
    /// The definition.
    pub def: ParamDef,
}

/// A `.model` card.
#[derive(Clone, PartialEq, Debug)]
pub struct Model {
    /// The file.
    pub file: FileId,
    /// Name.
    pub name: Word,
    /// Type word.
    pub kind: Word,
    /// Parameters.
    pub params: Vec<Param>,
}

/// The top level or a subcircuit.
#[derive(Clone, Debug, Default)]
pub struct Scope {
    /// Name and place; `None` at the top.
    pub name: Option<(String, Span)>,
    /// The scope in which it is defined.
    pub parent: Option<ScopeId>,
    /// Pins: spelling and place.
    pub pins: Vec<(String, Span)>,
    /// Parameters, defaults of the header included; a later definition wins.
    pub params: HashMap<Folded, Definition>,
    /// Names of the parameters in order of first definition.
    pub param_order: Vec<Folded>,
    /// Element cards in order.
    pub cards: Vec<CardRef>,
    /// Marks in order.
    pub marks: Vec<CardRef>,
    /// Models.
    pub models: HashMap<Folded, Model>,
    /// Subcircuits defined here.
    pub subcircuits: HashMap<Folded, ScopeId>,
    /// Cards and includes of this scope that could not be read.
    pub gaps: Vec<Gap>,
}

/// The whole netlist.
#[derive(Clone, Debug, Default)]
pub struct Program {
    /// Scope 0 is the top.
    pub scopes: Vec<Scope>,
    /// Every file that takes part.
    pub files: BTreeMap<FileId, Arc<Parse>>,
    /// `.global` nodes.
    pub globals: HashMap<Folded, Span>,
    /// Includes that are still asked for.
    pub missing: Vec<IncludeRequest>,
    /// Faults found on the way.
    pub issues: Vec<Issue>,
    /// The file everything starts from.
    pub root: Option<FileId>,
}

impl Program {
    /// A scope.
    pub fn scope(&self, id: ScopeId) -> Option<&Scope> {
        self.scopes.get(id.0 as usize)
    }

    /// A parsed file of the program.
    pub fn file(&self, id: FileId) -> Option<&Arc<Parse>> {
        self.files.get(&id)
    }

    /// The text of a word in a file.
    pub fn text(&self, file: FileId, range: TextRange) -> &str {
        self.file(file).map_or("", |parse| parse.tree.slice(range))
    }

    /// A subcircuit visible from a scope.
    pub fn find_subcircuit(&self, from: ScopeId, name: &Folded) -> Option<ScopeId> {
        self.outward(from)
            .find_map(|scope| scope.subcircuits.get(name).copied())
    }

    /// A model visible from a scope.
    pub fn find_model(&self, from: ScopeId, name: &Folded) -> Option<&Model> {
        self.outward(from).find_map(|scope| scope.models.get(name))
    }

    /// A scope and all scopes around it, from the inside out.
    pub fn outward(&self, from: ScopeId) -> impl Iterator<Item = &Scope> {
        let mut next = Some(from);
        std::iter::from_fn(move || {
            let scope = self.scope(next?)?;
            next = scope.parent;
            Some(scope)
        })
    }
}

/// Reads `root` and its includes. `statements` bounds the work: an include may stand in many
/// places.
pub fn gather(store: &dyn FileStore, root: FileId, nesting: usize, statements: usize) -> Program {
    let mut gatherer = Gatherer {
        store,
        program: Program {
            scopes: vec![Scope::default()],
            root: Some(root),
            ..Program::default()
        },
        open: vec![ScopeId(0)],
        including: Vec::new(),
        nesting,
        budget: statements,
    };
    gatherer.file(root, None);
    gatherer.program
}

/// Whether a fault of the text means that something written is missing from the circuit.
fn loses_a_card(kind: &SyntaxErrorKind) -> bool {
    !matches!(
        kind,
        SyntaxErrorKind::StrayContinuation
            | SyntaxErrorKind::UnexpectedWord(_)
            | SyntaxErrorKind::EndsMismatch { .. }
            | SyntaxErrorKind::NoMarkToContinue
    )
}

struct Gatherer<'s> {
    store: &'s dyn FileStore,
    program: Program,
    open: Vec<ScopeId>,
    /// Files being read, each with the section that is asked for, in lower case.
    including: Vec<(FileId, Option<String>)>,
    nesting: usize,
    budget: usize,
}

impl Gatherer<'_> {
    /// Reads one file, or one section of it. Depth is bounded by `nesting`.
    fn file(&mut self, file: FileId, section: Option<&str>) {
        let Some(parse) = self.store.file(file) else {
            return;
        };
        self.program.files.insert(file, Arc::clone(&parse));
        self.including
            .push((file, section.map(str::to_ascii_lowercase)));
        let open_before = self.open.len();
        let mut inside: Option<String> = None;
        let mut faults = parse
            .errors
            .iter()
            .filter(|error| loses_a_card(&error.kind))
            .peekable();
        for (index, statement) in parse.statements.iter().enumerate() {
            if self.budget == 0 {
                break;
            }
            self.budget -= 1;
            while let Some(error) = faults.next_if(|e| e.range.start < statement.range.start) {
                self.gap("a card cannot be read", Span::new(file, error.range));
            }
            if let StatementKind::Dot(dot) = &statement.kind {
                match dot.as_ref() {
                    Dot::Section(name) => {
                        inside = Some(parse.tree.slice(name.range).to_owned());
                        continue;
                    }
                    Dot::EndSection => {
                        inside = None;
                        continue;
                    }
                    _ => {}
                }
            }
            let wanted = match (section, &inside) {
                (Some(section), Some(inside)) => section.eq_ignore_ascii_case(inside),
                (Some(_), None) => false,
                (None, Some(_)) => false,
                (None, None) => true,
            };
            if wanted {
                self.statement(file, &parse, index as u32, &statement.kind);
            }
        }
        for error in faults {
            self.gap("a card cannot be read", Span::new(file, error.range));
        }
        self.open.truncate(open_before.max(1));
        self.including.pop();
    }

    fn gap(&mut self, reason: &str, span: Span) {
        let reason = reason.to_owned();
        self.current().gaps.push(Gap { reason, span });
    }

    fn current(&mut self) -> &mut Scope {
        let id = self.open.last().map_or(0, |id| id.0 as usize);
        &mut self.program.scopes[id]
    }

    fn issue(&mut self, kind: IssueKind, span: Span, other: Option<Span>) {
        self.program.issues.push(Issue { kind, span, other });
    }

    fn statement(&mut self, file: FileId, parse: &Arc<Parse>, index: u32, kind: &StatementKind) {
        let card = CardRef {
            file,
            statement: index,
        };
        match kind {
            StatementKind::Card(_) => self.current().cards.push(card),
            StatementKind::Mark(_) => self.current().marks.push(card),
            StatementKind::Dot(dot) => self.dot(file, parse, dot),
            StatementKind::Title => {}
        }
    }

    fn dot(&mut self, file: FileId, parse: &Arc<Parse>, dot: &Dot) {
        let text = |word: Word| parse.tree.slice(word.range).to_owned();
        match dot {
            Dot::Subckt { name, pins, params } => {
                let pins = pins
                    .iter()
                    .map(|pin| (text(*pin), Span::new(file, pin.range)))
                    .collect();
                self.open_subcircuit(text(*name), Span::new(file, name.range), pins);
                self.define(file, parse, params);
            }
            Dot::Ends { .. } if self.open.len() > 1 => {
                self.open.pop();
            }
            Dot::Param(params) => self.define(file, parse, params),
            Dot::Model { name, kind, params } => {
                let folded = Folded::new(&text(*name));
                let model = Model {
                    file,
                    name: *name,
                    kind: *kind,
                    params: params.clone(),
                };
                let span = Span::new(file, name.range);
                let before = self.current().models.insert(folded, model);
                if let Some(before) = before {
                    let kind = IssueKind::DuplicateName {
                        what: "model",
                        name: text(*name),
                    };
                    let other = Span::new(before.file, before.name.range);
                    self.issue(kind, span, Some(other));
                }
            }
            Dot::Include(path) => self.include(file, parse, path),
            Dot::Global(nodes) => {
                for node in nodes {
                    let span = Span::new(file, node.range);
                    let name = Folded::new(&text(*node));
                    self.program.globals.entry(name).or_insert(span);
                }
            }
            _ => {}
        }
    }

    fn open_subcircuit(&mut self, name: String, span: Span, pins: Vec<(String, Span)>) {
        let id = ScopeId(self.program.scopes.len() as u32);
        let parent = self.open.last().copied();
        let folded = Folded::new(&name);
        self.program.scopes.push(Scope {
            name: Some((name.clone(), span)),
            parent,
            pins,
            ..Scope::default()
        });
        let before = self.current().subcircuits.insert(folded, id);
        let place = before
            .and_then(|id| self.program.scope(id))
            .and_then(|scope| scope.name.as_ref())
            .map(|(_, span)| *span);
        if let Some(other) = place
            && other != span
        {
            let kind = IssueKind::DuplicateName {
                what: "subcircuit",
                name,
            };
            self.issue(kind, span, Some(other));
        }
        self.open.push(id);
    }

    fn define(&mut self, file: FileId, parse: &Arc<Parse>, params: &[ParamDef]) {
        for def in params {
            let name = Folded::new(parse.tree.slice(def.name.range));
            let definition = Definition {
                file,
                def: def.clone(),
            };
            let scope = self.current();
            if scope.params.insert(name.clone(), definition).is_none() {
                scope.param_order.push(name);
            }
        }
    }

    fn is_open(&self, file: FileId, section: Option<&str>) -> bool {
        let section = section.map(str::to_ascii_lowercase);
        self.including.contains(&(file, section))
    }

    fn include(&mut self, file: FileId, parse: &Arc<Parse>, path: &IncludePath) {
        let spelling = parse.tree.slice(path.path.range).to_owned();
        let span = Span::new(file, path.path.range);
        let section = path
            .section
            .map(|word| parse.tree.slice(word.range).to_owned());
        match self.store.include(file, &spelling) {
            // A library may ask for another section of itself.
            Include::File(target) if self.is_open(target, section.as_deref()) => {
                self.issue(IssueKind::IncludeCycle { path: spelling }, span, None);
            }
            Include::File(_) if self.including.len() >= self.nesting => {
                let kind = IssueKind::LimitReached {
                    key: LimitKey::Nesting,
                    limit: self.nesting,
                };
                self.issue(kind, span, None);
            }
            Include::File(target) => self.file(target, section.as_deref()),
            Include::Refused(reason) => {
                self.gap("a file it includes is missing", span);
                let kind = IssueKind::MissingInclude {
                    path: spelling,
                    reason,
                };
                self.issue(kind, span, None);
            }
            Include::Unknown => self.program.missing.push(IncludeRequest {
                from: file,
                path: spelling,
            }),
        }
    }
}
