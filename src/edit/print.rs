//! Writing an edit as one line.

use super::field::{Field, quote};
use super::{Change, Edit};
use crate::clock::Zone;

/// The line of an edit, in absolute form: seconds when not zero, an offset when a local
/// time occurs twice.
pub fn print(edit: &Edit, zone: Zone) -> String {
    let mut line = match &edit.what {
        Change::Move { piece, to } => format!("move {piece} to {}", zone.print(*to)),
        Change::Pin { piece, on } => format!("pin {piece} on {on}"),
        Change::Unpin(piece) => format!("unpin {piece}"),
        Change::Fasten(piece) => format!("fasten {piece}"),
        Change::Loosen(piece) => format!("loosen {piece}"),
        Change::Swap(first, second) => format!("swap {first} with {second}"),
        Change::Withdraw(piece) => format!("withdraw {piece}"),
        Change::Restore(piece) => format!("restore {piece}"),
        Change::Close { resource, span } => {
            format!(
                "close {resource} from {} to {}",
                zone.print(span.start),
                zone.print(span.end)
            )
        }
        Change::Reopen { resource, span } => {
            format!(
                "reopen {resource} from {} to {}",
                zone.print(span.start),
                zone.print(span.end)
            )
        }
        Change::Add { id, span, fields } => {
            let (start, end) = (zone.print(span.start), zone.print(span.end));
            format!("add {id} from {start} to {end}{}", fields_text(fields))
        }
        Change::AddResource { id, kind, fields } => {
            let kind = kind
                .as_ref()
                .map(|kind| format!(" kind {kind}"))
                .unwrap_or_default();
            format!("add resource {id}{kind}{}", fields_text(fields))
        }
        Change::Set { id, field } => {
            format!("set {id}{}", fields_text(std::slice::from_ref(field)))
        }
        Change::Drop(id) => format!("drop {id}"),
        Change::Settle(until) => format!("settle until {}", zone.print(*until)),
        Change::Prefer(prefer) => format!("prefer {}", prefer.name()),
        Change::Undo => "undo".into(),
        Change::Redo => "redo".into(),
    };
    if let Some(because) = &edit.because {
        line.push_str(&format!(" because {}", quote(because)));
    }
    line
}

fn fields_text(fields: &[Field]) -> String {
    fields
        .iter()
        .map(|field| format!(" {} {}", field.key(), field.print()))
        .collect()
}
