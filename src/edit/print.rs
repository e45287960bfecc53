//! Writing an edit as one line.

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
        Change::Undo => "undo".into(),
        Change::Redo => "redo".into(),
    };
    if let Some(because) = &edit.because {
        let escaped = because.replace('\\', "\\\\").replace('"', "\\\"");
        line.push_str(&format!(" because \"{escaped}\""));
    }
    line
}
