//! When something may be called unused: what all rules about unused names share.

use crate::elaborate::{IssueKind, LimitKey};
use crate::rules::TextContext;
use crate::syntax::ItemKind;
use crate::text::FileId;

/// The root file, when it is a netlist (it has cards outside of subcircuits) and all of it and of
/// what it includes could be read.
pub(super) fn root_to_tell(context: &TextContext<'_>) -> Option<FileId> {
    let program = context.program;
    let root = program.root?;
    let has_cards = program.scopes.first()?.cards.iter().any(|c| c.file == root);
    let complete = program.missing.is_empty() && !is_cut(context) && !is_encrypted(context);
    (has_cards && complete).then_some(root)
}

/// Whether a file was not read.
fn is_cut(context: &TextContext<'_>) -> bool {
    context.elaborated.issues.iter().any(|issue| {
        matches!(
            issue.kind,
            IssueKind::MissingInclude { .. }
                | IssueKind::LimitReached {
                    key: LimitKey::Nesting | LimitKey::FileBytes,
                    ..
                }
        )
    })
}

/// Whether a file has a section that cannot be looked into. Lines behind `.end` are not meant.
fn is_encrypted(context: &TextContext<'_>) -> bool {
    context.program.files.values().any(|parse| {
        parse.tree.items().iter().any(|item| {
            let first = item.lines.first().and_then(|line| {
                let token = parse.tree.tokens().get(line.start as usize)?;
                parse.tree.text().get(token.start as usize..)
            });
            let text = first.unwrap_or("").trim_start();
            let starts = |word: &str| {
                let head = text.get(..word.len());
                head.is_some_and(|head| head.eq_ignore_ascii_case(word))
            };
            item.kind == ItemKind::Opaque && starts(".prot")
        })
    })
}
