//! The fields that `add` and `set` know, with their values in text.

use crate::clock::{parse_length, print_length};
use std::sync::Arc;

/// One field of a request or a resource with its value.
#[derive(Clone, Debug, PartialEq, Eq)]
pub enum Field {
    /// Shown beside the id.
    Title(Arc<str>),
    /// Seats a request takes.
    Size(Option<u64>),
    /// What a request needs.
    Needs(Vec<Arc<str>>),
    /// Who takes part.
    People(Vec<Arc<str>>),
    /// Only these resources or kinds; empty is all.
    Only(Vec<Arc<str>>),
    /// None of these.
    Never(Vec<Arc<str>>),
    /// How much it hurts to move or decline it.
    Weight(u32),
    /// Elapsed seconds.
    Length(i64),
    /// Seconds kept free before.
    Setup(Option<i64>),
    /// Seconds kept free after.
    Turnaround(Option<i64>),
    /// Seats a resource has.
    Seats(Option<u64>),
    /// What a resource offers.
    Offers(Vec<Arc<str>>),
    /// The rule by which a request repeats (RFC 5545).
    Repeat(Option<Arc<str>>),
    /// Whether all its dates stay on one resource.
    Together(bool),
}

/// The keys, as written.
pub(super) const KEYS: [&str; 14] = [
    "title",
    "size",
    "needs",
    "people",
    "only",
    "never",
    "weight",
    "length",
    "setup",
    "turnaround",
    "seats",
    "offers",
    "repeat",
    "together",
];

impl Field {
    /// Its key.
    pub fn key(&self) -> &'static str {
        match self {
            Field::Title(_) => "title",
            Field::Size(_) => "size",
            Field::Needs(_) => "needs",
            Field::People(_) => "people",
            Field::Only(_) => "only",
            Field::Never(_) => "never",
            Field::Weight(_) => "weight",
            Field::Length(_) => "length",
            Field::Setup(_) => "setup",
            Field::Turnaround(_) => "turnaround",
            Field::Seats(_) => "seats",
            Field::Offers(_) => "offers",
            Field::Repeat(_) => "repeat",
            Field::Together(_) => "together",
        }
    }

    /// Reads the value of a key; the message says what belongs there.
    ///
    /// # Errors
    /// What belongs there instead.
    pub(super) fn read(key: &str, value: &str) -> Result<Field, &'static str> {
        let number = || match value {
            "none" => Ok(None),
            _ => value
                .parse::<u32>()
                .map(|n| Some(u64::from(n)))
                .map_err(|_| "a whole number, or none"),
        };
        let length = || match value {
            "none" => Ok(None),
            _ => parse_length(value)
                .map(Some)
                .map_err(|_| "a length such as 10m, or none"),
        };
        let list = || read_list(value).ok_or("a list such as a,b or \"one, two\",c, or none");
        Ok(match key {
            "title" => Field::Title(unquote(value).ok_or("a text in quotes")?.into()),
            "size" => Field::Size(number()?),
            "seats" => Field::Seats(number()?),
            "needs" => Field::Needs(list()?),
            "people" => Field::People(list()?),
            "only" => Field::Only(list()?),
            "never" => Field::Never(list()?),
            "offers" => Field::Offers(list()?),
            "weight" => Field::Weight(
                value
                    .parse()
                    .ok()
                    .filter(|w| *w > 0)
                    .ok_or("a whole number, at least 1")?,
            ),
            "length" => Field::Length(
                length()?
                    .filter(|s| *s > 0)
                    .ok_or("a length such as 1h30m")?,
            ),
            "repeat" if value == "none" => Field::Repeat(None),
            "repeat" => Field::Repeat(Some(
                unquote(value)
                    .ok_or("a rule in quotes such as \"FREQ=WEEKLY;COUNT=10\", or none")?
                    .into(),
            )),
            "together" => Field::Together(match value {
                "yes" => true,
                "no" => false,
                _ => return Err("yes or no"),
            }),
            "setup" => Field::Setup(length()?),
            _ => Field::Turnaround(length()?),
        })
    }

    /// The value in text.
    pub(super) fn print(&self) -> String {
        let number = |value: &Option<u64>| value.map_or_else(|| "none".into(), |n| n.to_string());
        let length = |value: &Option<i64>| value.map_or_else(|| "none".into(), print_length);
        match self {
            Field::Title(text) => quote(text),
            Field::Size(value) | Field::Seats(value) => number(value),
            Field::Setup(value) | Field::Turnaround(value) => length(value),
            Field::Repeat(rule) => rule.as_deref().map_or_else(|| "none".into(), quote),
            Field::Together(together) => if *together { "yes" } else { "no" }.into(),
            Field::Weight(weight) => weight.to_string(),
            Field::Length(seconds) => print_length(*seconds),
            Field::Needs(list)
            | Field::People(list)
            | Field::Only(list)
            | Field::Never(list)
            | Field::Offers(list) => print_list(list),
        }
    }
}

/// A text in quotes, with escapes.
pub(super) fn quote(text: &str) -> String {
    format!("\"{}\"", text.replace('\\', "\\\\").replace('"', "\\\""))
}

/// Undoes [`quote`]; `None` when the quotes are not whole or something stands outside them.
pub(super) fn unquote(text: &str) -> Option<String> {
    let inside = text
        .strip_prefix('"')?
        .strip_suffix('"')
        .filter(|_| text.len() >= 2)?;
    let mut plain = String::with_capacity(inside.len());
    let mut chars = inside.chars();
    while let Some(c) = chars.next() {
        match c {
            '\\' => plain.push(chars.next()?),
            '"' => return None,
            c => plain.push(c),
        }
    }
    Some(plain)
}

/// A list: plain words as they are, everything else in quotes; `none` when empty.
pub fn print_list(list: &[Arc<str>]) -> String {
    if list.is_empty() {
        return "none".into();
    }
    let plain = |text: &str| crate::text::is_id(text) && text != "none" && text != "because";
    let items: Vec<String> = list
        .iter()
        .map(|text| {
            if plain(text) {
                text.to_string()
            } else {
                quote(text)
            }
        })
        .collect();
    items.join(",")
}

fn read_list(text: &str) -> Option<Vec<Arc<str>>> {
    if text == "none" {
        return Some(Vec::new());
    }
    let mut items: Vec<Arc<str>> = Vec::new();
    let mut rest = text;
    loop {
        let (item, after) = if rest.starts_with('"') {
            let mut escaped = false;
            let end = rest.char_indices().skip(1).find(|(_, c)| {
                let ends = *c == '"' && !escaped;
                escaped = *c == '\\' && !escaped;
                ends
            })?;
            (
                unquote(&rest[..=end.0]).filter(|item| !item.trim().is_empty())?,
                &rest[end.0 + 1..],
            )
        } else {
            let end = rest.find(',').unwrap_or(rest.len());
            let (item, after) = rest.split_at(end);
            (
                Some(item.to_string()).filter(|item| !item.is_empty() && !item.contains('"'))?,
                after,
            )
        };
        let item: Arc<str> = item.into();
        if !items.contains(&item) {
            items.push(item);
        }
        if after.is_empty() {
            return Some(items);
        }
        rest = after.strip_prefix(',')?;
    }
}
