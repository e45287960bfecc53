//! A proof by cases as lines of text, each case before the cases within it:
//!
//! ```text
//! place REQUEST: ROOM ROOM      followed by one case for each of them, in that order
//! none REQUEST                  no resource is left for it
//! short TIME: REQUEST REQUEST   too few are left for these, which all run then
//! prices UNIT: REQUEST=PRICE    what is left cannot take these
//! ```
//!
//! A request that has been placed may have a price too; it counts on its room alone.

use crate::claim::Case;
use crate::clock::Instant;
use std::sync::Arc;

/// Cases within cases beyond which a file is refused.
const DEEPEST: usize = 1_000;

fn join(ids: &[Arc<str>]) -> String {
    let ids: Vec<&str> = ids.iter().map(|id| &**id).collect();
    ids.join(" ")
}

/// The lines of a tree.
pub(super) fn print(case: &Case, time: &dyn Fn(Instant) -> String, lines: &mut Vec<String>) {
    match case {
        Case::NoPlace { piece } => lines.push(format!("none {piece}")),
        Case::Short { at, pieces } => lines.push(format!("short {}: {}", time(*at), join(pieces))),
        Case::Prices { unit, prices } => {
            let prices: Vec<String> = prices
                .iter()
                .map(|(piece, price)| format!("{piece}={price}"))
                .collect();
            lines.push(format!("prices {unit}: {}", prices.join(" ")));
        }
        Case::Place { piece, on } => {
            let resources: Vec<&str> = on.iter().map(|(resource, _)| &**resource).collect();
            lines.push(format!("place {piece}: {}", resources.join(" ")));
            for (_, case) in on {
                print(case, time, lines);
            }
        }
    }
}

/// The tree of some lines; the error names the line.
pub(super) fn parse(
    lines: &[String],
    time: &dyn Fn(&str) -> Option<Instant>,
) -> Result<Case, String> {
    let mut rest = lines.iter();
    let case = one(&mut rest, time, 0)?;
    match rest.next() {
        None => Ok(case),
        Some(line) => Err(format!("nothing should follow before \"{line}\"")),
    }
}

fn one(
    rest: &mut std::slice::Iter<'_, String>,
    time: &dyn Fn(&str) -> Option<Instant>,
    depth: usize,
) -> Result<Case, String> {
    let line = rest.next().ok_or("a case is missing at the end")?;
    let wrong = || format!("\"{line}\" is no case");
    if depth > DEEPEST {
        return Err("the cases lie too deep within each other".into());
    }
    let (word, said) = line.split_once(' ').ok_or_else(wrong)?;
    // Times hold colons as well; names do not.
    let (head, list) = said.rsplit_once(": ").unwrap_or((said, ""));
    let list = list.split_whitespace();
    match word {
        "none" => Ok(Case::NoPlace { piece: said.into() }),
        "short" => Ok(Case::Short {
            at: time(head).ok_or_else(wrong)?,
            pieces: list.map(Arc::from).collect(),
        }),
        "prices" => {
            let price = |said: &str| {
                let (piece, price) = said.split_once('=')?;
                Some((Arc::from(piece), price.parse().ok()?))
            };
            Ok(Case::Prices {
                unit: head.parse().map_err(|_| wrong())?,
                prices: list.map(price).collect::<Option<_>>().ok_or_else(wrong)?,
            })
        }
        "place" => {
            let mut on = Vec::new();
            for resource in list {
                on.push((Arc::from(resource), one(rest, time, depth + 1)?));
            }
            Ok(Case::Place {
                piece: head.trim_end_matches(':').into(),
                on,
            })
        }
        _ => Err(wrong()),
    }
}
