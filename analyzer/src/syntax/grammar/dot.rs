//! Dot lines. Those that squeg has no use for belong to a simulator and are kept unread.

use super::fault;
use super::fields::Field;
use crate::syntax::ast::{Dot, IncludePath, Param, ParamDef, Value, Word};
use crate::syntax::error::{SyntaxError, SyntaxErrorKind};
use crate::syntax::tree::Tree;
use crate::text::TextRange;

/// Reads a dot line.
pub(super) fn read_dot(
    tree: &Tree,
    fields: &[Field],
    errors: &mut Vec<SyntaxError>,
) -> Option<Dot> {
    let Some(Field::Word(word)) = fields.first() else {
        return Some(Dot::Other);
    };
    let rest = &fields[1..];
    let keyword = tree.slice(word.range).to_ascii_lowercase();
    let mut missing = |needed: &'static str| {
        errors.push(fault(SyntaxErrorKind::MissingFields { needed }, word.range));
        None
    };
    match keyword.as_str() {
        ".subckt" | ".macro" => {
            let mut words = plain_words(tree, rest);
            if words.is_empty() {
                return missing("a name and pins");
            }
            Some(Dot::Subckt {
                name: words.remove(0),
                pins: words,
                params: definitions(tree, rest, errors),
            })
        }
        ".ends" | ".eom" => Some(Dot::Ends {
            name: plain_words(tree, rest).first().copied(),
        }),
        ".param" | ".parameter" | ".parameters" => {
            Some(Dot::Param(definitions(tree, rest, errors)))
        }
        ".model" => match plain_words(tree, rest).as_slice() {
            [name, kind, ..] => Some(Dot::Model {
                name: *name,
                kind: *kind,
                params: keyed(rest),
            }),
            _ => missing("a name and a type"),
        },
        ".include" | ".inc" | ".incl" => match paths(tree, rest).first() {
            Some(path) => Some(Dot::Include(IncludePath {
                path: *path,
                section: None,
            })),
            None => missing("a file"),
        },
        ".lib" => match paths(tree, rest).as_slice() {
            [path, section, ..] => Some(Dot::Include(IncludePath {
                path: *path,
                section: Some(*section),
            })),
            [one] if looks_like_path(tree.slice(one.range)) => Some(Dot::Include(IncludePath {
                path: *one,
                section: None,
            })),
            [section] => Some(Dot::Section(*section)),
            [] => missing("a section, or a file and a section"),
        },
        ".endl" => Some(Dot::EndSection),
        ".global" => Some(Dot::Global(plain_words(tree, rest))),
        ".temp" | ".temperature" => match rest.first() {
            Some(Field::Word(word)) => Some(Dot::Temp(Value {
                range: word.range,
                quoted: false,
            })),
            Some(Field::Quoted(range)) => Some(Dot::Temp(Value {
                range: *range,
                quoted: true,
            })),
            _ => missing("a temperature in degrees Celsius"),
        },
        ".end" => Some(Dot::End),
        _ => Some(Dot::Other),
    }
}

fn looks_like_path(text: &str) -> bool {
    text.contains(['/', '\\', '.'])
}

fn plain_words(tree: &Tree, fields: &[Field]) -> Vec<Word> {
    let mut words = Vec::new();
    for field in fields {
        match field {
            Field::Word(word) if !tree.slice(word.range).eq_ignore_ascii_case("params:") => {
                words.push(*word);
            }
            Field::Quoted(range) => words.push(Word { range: *range }),
            _ => {}
        }
    }
    words
}

/// Words as paths: quotes around them are dropped from the range.
fn paths(tree: &Tree, fields: &[Field]) -> Vec<Word> {
    let strip = |range: TextRange| {
        let text = tree.slice(range);
        let quoted = text.len() >= 2 && text.starts_with(['\'', '"', '{']);
        if quoted {
            TextRange::new(range.start + 1, range.end - 1)
        } else {
            range
        }
    };
    fields
        .iter()
        .filter_map(|field| match field {
            Field::Word(word) => Some(Word {
                range: strip(word.range),
            }),
            Field::Quoted(range) => Some(Word {
                range: strip(*range),
            }),
            _ => None,
        })
        // `''` names no file.
        .filter(|word| !word.range.is_empty())
        .collect()
}

fn keyed(fields: &[Field]) -> Vec<Param> {
    fields
        .iter()
        .filter_map(|field| match field {
            Field::Param(param) => Some(*param),
            _ => None,
        })
        .collect()
}

/// Definitions of a `.param` line or subcircuit header. A value written with blanks and no
/// quotes runs to the next definition.
fn definitions(tree: &Tree, fields: &[Field], errors: &mut Vec<SyntaxError>) -> Vec<ParamDef> {
    let mut found: Vec<ParamDef> = Vec::new();
    for field in fields {
        match field {
            Field::Param(param) => found.push(ParamDef {
                name: param.key,
                arguments: None,
                value: param.value,
            }),
            Field::Call {
                name,
                arguments,
                value,
            } => found.push(ParamDef {
                name: *name,
                arguments: Some(arguments.clone()),
                value: *value,
            }),
            Field::Word(word) => extend_last(&mut found, word.range),
            Field::Quoted(range) => extend_last(&mut found, *range),
            Field::Sign(_) => {}
        }
    }
    for definition in &found {
        let text = tree.slice(definition.value.range);
        if let Some(kind) = super::card::value_fault(text, definition.value.quoted)
            && !text.is_empty()
        {
            errors.push(fault(kind, definition.value.range));
        }
    }
    found
}

fn extend_last(found: &mut [ParamDef], range: TextRange) {
    if let Some(last) = found.last_mut() {
        last.value.range = last.value.range.cover(range);
        last.value.quoted = false;
    }
}
