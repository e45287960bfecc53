//! The one table of what can be done on the screen: name, keys, help, group. Keys, footer,
//! help and documentation all come from it.
//!
//! Imports `text`.

use crate::text::{clean, nearest};
use serde::Deserialize;
use std::collections::BTreeMap;

/// What a key can mean.
#[derive(Clone, Copy, Debug, PartialEq, Eq, Hash)]
#[expect(missing_docs, reason = "the table below says what each does")]
pub enum Action {
    Left,
    Right,
    Up,
    Down,
    First,
    Last,
    PageUp,
    PageDown,
    DayBefore,
    DayAfter,
    NextPeak,
    PeakBefore,
    Closer,
    Wider,
    Carry,
    PutBack,
    Pin,
    Fasten,
    Withdraw,
    Close,
    Reopen,
    Add,
    Set,
    Drop,
    Undo,
    Redo,
    Save,
    Find,
    Findings,
    Days,
    Why,
    Who,
    Prefer,
    Command,
    Help,
    Leave,
    Suspend,
    Redraw,
}

/// One line of the table.
#[derive(Clone, Copy, Debug)]
pub struct Entry {
    /// What is done.
    pub action: Action,
    /// Its name in a keys file.
    pub name: &'static str,
    /// The keys unless a keys file says otherwise.
    pub keys: &'static [&'static str],
    /// One line of help.
    pub help: &'static str,
    /// Where help lists it.
    pub group: &'static str,
    /// The word in the footer, for the few shown there.
    pub hint: Option<&'static str>,
}

const fn entry(
    action: Action,
    name: &'static str,
    keys: &'static [&'static str],
    group: &'static str,
    hint: Option<&'static str>,
    help: &'static str,
) -> Entry {
    Entry {
        action,
        name,
        keys,
        help,
        group,
        hint,
    }
}

const LOOK: &str = "Looking around";
const CHANGE: &str = "Changing";
const DESK: &str = "The desk";

/// Everything that can be done, in the order of the help.
pub const ACTIONS: [Entry; 38] = [
    entry(
        Action::Left,
        "left",
        &["left"],
        LOOK,
        None,
        "to the piece before; while carrying: one grid step earlier",
    ),
    entry(
        Action::Right,
        "right",
        &["right"],
        LOOK,
        None,
        "to the piece after; while carrying: one grid step later",
    ),
    entry(
        Action::Up,
        "up",
        &["up"],
        LOOK,
        None,
        "one row up; while carrying: to the resource above",
    ),
    entry(
        Action::Down,
        "down",
        &["down"],
        LOOK,
        None,
        "one row down; while carrying: to the resource below",
    ),
    entry(
        Action::First,
        "first",
        &["home"],
        LOOK,
        None,
        "to the first piece of the row",
    ),
    entry(
        Action::Last,
        "last",
        &["end"],
        LOOK,
        None,
        "to the last piece of the row",
    ),
    entry(
        Action::PageUp,
        "page-up",
        &["pageup"],
        LOOK,
        None,
        "a page of rows up; while carrying: an hour earlier",
    ),
    entry(
        Action::PageDown,
        "page-down",
        &["pagedown"],
        LOOK,
        None,
        "a page of rows down; while carrying: an hour later",
    ),
    entry(
        Action::DayBefore,
        "day-before",
        &[","],
        LOOK,
        None,
        "to the day before; while carrying: a day earlier",
    ),
    entry(
        Action::DayAfter,
        "day-after",
        &["."],
        LOOK,
        None,
        "to the day after; while carrying: a day later",
    ),
    entry(
        Action::NextPeak,
        "next-peak",
        &["n"],
        LOOK,
        Some("peak"),
        "to the next peak: where the load is largest",
    ),
    entry(
        Action::PeakBefore,
        "peak-before",
        &["N"],
        LOOK,
        None,
        "to the peak before",
    ),
    entry(
        Action::Closer,
        "closer",
        &["+", "="],
        LOOK,
        None,
        "fewer minutes to a column",
    ),
    entry(
        Action::Wider,
        "wider",
        &["-"],
        LOOK,
        None,
        "more minutes to a column",
    ),
    entry(
        Action::Find,
        "find",
        &["/"],
        LOOK,
        Some("find"),
        "find a piece by id, title or person",
    ),
    entry(
        Action::Days,
        "days",
        &["d"],
        LOOK,
        None,
        "the days, each with its load and what is in use",
    ),
    entry(
        Action::Findings,
        "findings",
        &["i"],
        LOOK,
        None,
        "what is doubtful, has no place, or clashes",
    ),
    entry(
        Action::Why,
        "why",
        &["y"],
        LOOK,
        Some("why"),
        "why not fewer: what the count rests on, and why something has no place",
    ),
    entry(
        Action::Who,
        "who",
        &["t"],
        CHANGE,
        Some("who"),
        "who can take the piece in hand: every resource, free or not and why; Enter pins",
    ),
    entry(
        Action::Prefer,
        "prefer",
        &["k"],
        CHANGE,
        None,
        "put fewest changes before fewest resources, or back",
    ),
    entry(
        Action::Carry,
        "carry",
        &["enter"],
        CHANGE,
        Some("carry"),
        "take the piece up and carry it; again: drop it here",
    ),
    entry(
        Action::PutBack,
        "put-back",
        &["esc"],
        CHANGE,
        None,
        "put the carried piece back; leave what is open; never destroys",
    ),
    entry(
        Action::Pin,
        "pin",
        &["p"],
        CHANGE,
        Some("pin"),
        "keep the piece on its resource, or let it go again",
    ),
    entry(
        Action::Fasten,
        "fasten",
        &["f"],
        CHANGE,
        Some("fasten"),
        "keep the piece at its start, or loosen it again",
    ),
    entry(
        Action::Withdraw,
        "withdraw",
        &["w"],
        CHANGE,
        Some("withdraw"),
        "take the request out of the plan, or restore it",
    ),
    entry(
        Action::Close,
        "close",
        &["c"],
        CHANGE,
        Some("close"),
        "close the row's resource for a while (asks from when to when)",
    ),
    entry(
        Action::Reopen,
        "reopen",
        &["o"],
        CHANGE,
        None,
        "reopen the row's resource (asks from when to when)",
    ),
    entry(
        Action::Add,
        "add",
        &["a"],
        CHANGE,
        None,
        "add a request: a form of its fields",
    ),
    entry(
        Action::Set,
        "set",
        &["e"],
        CHANGE,
        None,
        "edit the fields of the piece, or of the row's resource",
    ),
    entry(
        Action::Drop,
        "drop",
        &["D"],
        CHANGE,
        None,
        "take the request out of the file altogether",
    ),
    entry(
        Action::Undo,
        "undo",
        &["u"],
        CHANGE,
        Some("undo"),
        "take the last step back",
    ),
    entry(Action::Redo, "redo", &["U"], CHANGE, None, "do it again"),
    entry(
        Action::Command,
        "command",
        &[":"],
        DESK,
        Some("edit"),
        "type an edit, or: save, save NAME.toml, leave, help",
    ),
    entry(
        Action::Save,
        "save",
        &["s"],
        DESK,
        Some("save"),
        "save the timetable and the plan beside it",
    ),
    entry(
        Action::Help,
        "help",
        &["?"],
        DESK,
        Some("help"),
        "this list",
    ),
    entry(
        Action::Leave,
        "leave",
        &["q", "ctrl-c"],
        DESK,
        Some("leave"),
        "leave; asks when something is not saved",
    ),
    entry(
        Action::Suspend,
        "suspend",
        &["ctrl-z"],
        DESK,
        None,
        "back to the shell for a while (fg returns)",
    ),
    entry(
        Action::Redraw,
        "redraw",
        &["ctrl-l"],
        DESK,
        None,
        "draw the screen anew",
    ),
];

/// Which key means what.
#[derive(Clone, Debug)]
pub struct Keys {
    meaning: BTreeMap<String, Action>,
}

impl Default for Keys {
    fn default() -> Keys {
        let pairs = ACTIONS
            .iter()
            .flat_map(|entry| entry.keys.iter().map(|key| (key.to_string(), entry.action)));
        Keys {
            meaning: pairs.collect(),
        }
    }
}

/// A keys file: `undo = ["u"]` under `[keys]`.
#[derive(Deserialize)]
#[serde(deny_unknown_fields)]
struct KeysFile {
    keys: BTreeMap<String, Vec<String>>,
}

impl Keys {
    /// The defaults, with the changes of a keys file.
    ///
    /// # Errors
    /// A sentence: not TOML, unknown action or key, or one key for two actions.
    pub fn with_file(text: &str) -> Result<Keys, String> {
        let file: KeysFile = toml_edit::de::from_str(text).map_err(|error| error.to_string())?;
        let mut keys = Keys::default();
        let mut given: BTreeMap<&str, &str> = BTreeMap::new();
        for (name, wanted) in &file.keys {
            let names = ACTIONS.iter().map(|entry| entry.name);
            let entry = ACTIONS
                .iter()
                .find(|entry| entry.name == name)
                .ok_or_else(|| {
                    let hint = nearest(name, names)
                        .map_or_else(String::new, |near| format!("; did you mean \"{near}\"?"));
                    format!("there is no action \"{}\"{hint}", clean(name))
                })?;
            keys.meaning.retain(|_, action| *action != entry.action);
            for key in wanted {
                if !is_key(key) {
                    return Err(format!(
                        "\"{}\" is no key; write one letter, or one of: {}",
                        clean(key),
                        NAMED.join(", ")
                    ));
                }
                if let Some(other) = given.insert(key, name) {
                    return Err(format!(
                        "the key \"{}\" is given to \"{other}\" and to \"{name}\"",
                        clean(key)
                    ));
                }
            }
            let action = entry.action;
            keys.meaning
                .extend(wanted.iter().map(|key| (key.clone(), action)));
        }
        // A default that was given away must not leave its action without any key.
        if let Some(entry) = ACTIONS
            .iter()
            .find(|entry| keys.of(entry.action).is_empty() && !file.keys.contains_key(entry.name))
        {
            return Err(format!(
                "\"{}\" has no key left; give it another",
                entry.name
            ));
        }
        Ok(keys)
    }

    /// What a key means.
    pub fn meaning(&self, key: &str) -> Option<Action> {
        self.meaning.get(key).copied()
    }

    /// The keys of an action.
    pub fn of(&self, action: Action) -> Vec<&str> {
        let mut keys: Vec<&str> = self
            .meaning
            .iter()
            .filter(|(_, of)| **of == action)
            .map(|(key, _)| key.as_str())
            .collect();
        // As the table lists them, so that the usual one comes first.
        let usual = ACTIONS
            .iter()
            .find(|entry| entry.action == action)
            .map_or(&[][..], |entry| entry.keys);
        keys.sort_by_key(|key| {
            usual
                .iter()
                .position(|other| other == key)
                .unwrap_or(usize::MAX)
        });
        keys
    }
}

/// Keys with names.
pub const NAMED: [&str; 13] = [
    "left",
    "right",
    "up",
    "down",
    "home",
    "end",
    "pageup",
    "pagedown",
    "enter",
    "esc",
    "tab",
    "space",
    "backspace",
];

fn is_key(key: &str) -> bool {
    let plain = key.strip_prefix("ctrl-").unwrap_or(key);
    NAMED.contains(&key)
        || (plain.chars().count() == 1 && plain.chars().all(|c| !c.is_control() && c != ' '))
}

#[cfg(test)]
mod tests {
    use super::*;
    use std::collections::BTreeSet;

    #[test]
    fn every_action_has_one_line_and_every_key_one_action() {
        let names: BTreeSet<&str> = ACTIONS.iter().map(|entry| entry.name).collect();
        assert_eq!(names.len(), ACTIONS.len());
        let keys: Vec<&str> = ACTIONS
            .iter()
            .flat_map(|entry| entry.keys.iter().copied())
            .collect();
        assert_eq!(keys.iter().collect::<BTreeSet<_>>().len(), keys.len());
        assert!(keys.iter().all(|key| is_key(key)));
    }

    #[test]
    fn the_keys_of_the_contract_are_the_defaults() {
        let keys = Keys::default();
        for (key, action) in [
            (":", Action::Command),
            ("u", Action::Undo),
            ("U", Action::Redo),
            ("/", Action::Find),
            ("?", Action::Help),
            ("q", Action::Leave),
        ] {
            assert_eq!(keys.meaning(key), Some(action));
        }
    }

    #[test]
    fn keys_can_be_changed() {
        let keys = Keys::with_file("[keys]\nundo = [\"z\"]\nsave = [\"ctrl-s\", \"u\"]\n").unwrap();
        assert_eq!(keys.meaning("z"), Some(Action::Undo));
        assert_eq!(keys.meaning("u"), Some(Action::Save));
        assert_eq!(keys.meaning("s"), None);
        for (bad, says) in [
            ("[keys]\nundu = [\"z\"]\n", "did you mean \"undo\"?"),
            ("[keys]\nundo = [\"zz\"]\n", "is no key"),
            ("[keys]\nundo = [\"z\"]\nredo = [\"z\"]\n", "is given to"),
            (
                "[keys]\nundo = [\"q\", \"ctrl-c\"]\n",
                "\"leave\" has no key left",
            ),
            ("[kexs]\n", "unknown field"),
        ] {
            let said = Keys::with_file(bad).unwrap_err();
            assert!(said.contains(says), "{bad}: {said}");
        }
    }
}
