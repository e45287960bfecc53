//! A form of fields for one request or resource. What it does is edits in the one language:
//! the fields are put together into lines, so whatever a line refuses the form refuses too.

use super::layout::RowKind;
use super::model::{Mode, Model};
use super::update::{Effect, make, typed};
use crate::edit::{Edit, print_list};
use crossterm::event::{KeyCode, KeyEvent, KeyModifiers};
use std::sync::Arc;
use tui_input::Input;

/// One field.
#[derive(Clone, Debug)]
pub struct Entry {
    /// What it is called.
    pub label: &'static str,
    /// A word of help.
    pub help: &'static str,
    /// What is typed.
    pub input: Input,
    before: String,
}

/// A form.
#[derive(Clone, Debug)]
pub struct Form {
    /// What it is about; empty for a new request.
    pub id: Option<Arc<str>>,
    /// The request it belongs to, where it is one of its dates; else the same.
    pub of: Arc<str>,
    /// The fields.
    pub fields: Vec<Entry>,
    /// The one in hand.
    pub chosen: usize,
}

const HELP: [(&str, &str); 13] = [
    ("id", "letters, digits, _ . -"),
    ("start", "2027-01-11 09:00"),
    ("end", "2027-01-11 11:00, or 11:00"),
    ("title", ""),
    ("size", "seats it takes, or none"),
    ("weight", "how much it hurts to move it, 1 or more"),
    ("needs", "what a resource must offer: a,b"),
    ("people", "who takes part: a,b"),
    ("only", "these resources or kinds, or none for all"),
    ("never", "not these, or none"),
    ("seats", "most that fit, or none for no limit"),
    ("offers", "a,b or none"),
    ("turnaround", "kept free after, such as 10m"),
];

fn entry(label: &'static str, value: String) -> Entry {
    let help = HELP
        .iter()
        .find(|(name, _)| *name == label)
        .map_or("", |(_, help)| help);
    Entry {
        label,
        help,
        input: Input::new(value.clone()),
        before: value,
    }
}

/// Opens the form: for a new request at the moment in hand, or for what is in hand.
pub(super) fn open(model: &mut Model, new: bool) {
    let zone = model.timetable().settings.zone;
    let list = |list: &[Arc<str>]| {
        if list.is_empty() {
            String::new()
        } else {
            print_list(list)
        }
    };
    let number = |value: Option<u64>| value.map_or_else(String::new, |value| value.to_string());
    let here = model
        .here
        .filter(|_| !new)
        .and_then(|here| model.rows.pieces.get(here));
    let row = model.rows.rows.get(model.row).map(|row| &row.kind);
    let form = match (here, row) {
        (Some(piece), _) => {
            let request = &piece.request;
            let rule = request.repeats.as_ref().and_then(|r| r.rule.as_deref());
            let together = if request.together { "yes" } else { "no" };
            Form {
                id: Some(Arc::clone(&piece.id)),
                of: Arc::clone(&request.id),
                fields: vec![
                    entry("title", request.title.to_string()),
                    entry("start", zone.print(piece.span.start)),
                    entry("end", zone.print(piece.span.end)),
                    entry("size", number(request.size)),
                    entry("weight", request.weight.to_string()),
                    entry("needs", list(&request.needs)),
                    entry("people", list(&request.people)),
                    entry("only", list(&request.only)),
                    entry("never", list(&request.never)),
                    entry("repeat", rule.unwrap_or_default().to_string()),
                    entry("together", together.into()),
                ],
                chosen: 0,
            }
        }
        (None, Some(RowKind::Resource(resource))) if !new => {
            let resource = &model.timetable().resources().all[*resource];
            Form {
                id: Some(Arc::clone(&resource.id)),
                of: Arc::clone(&resource.id),
                fields: vec![
                    entry("title", resource.title.as_deref().unwrap_or("").to_string()),
                    entry("seats", number(resource.seats)),
                    entry("offers", list(&resource.offers)),
                    entry(
                        "turnaround",
                        crate::clock::print_length(resource.turnaround),
                    ),
                ],
                chosen: 0,
            }
        }
        _ => Form {
            id: None,
            of: "".into(),
            fields: vec![
                entry("id", String::new()),
                entry("title", String::new()),
                entry("start", zone.print(model.at)),
                entry("end", zone.print(model.at + 3_600)),
                entry("size", String::new()),
                entry("weight", String::new()),
                entry("needs", String::new()),
                entry("people", String::new()),
                entry("repeat", String::new()),
                entry("together", String::new()),
            ],
            chosen: 0,
        },
    };
    model.mode = Mode::Form(Box::new(form));
}

impl Form {
    fn value(&self, label: &str) -> &str {
        self.fields
            .iter()
            .find(|field| field.label == label)
            .map_or("", |field| field.input.value().trim())
    }

    /// The lines that the fields mean.
    fn lines(&self) -> Vec<String> {
        let said = |field: &Entry| {
            let value = field.input.value().trim();
            match (field.label, value) {
                ("title", value) => format!(
                    "title \"{}\"",
                    value.replace('\\', "\\\\").replace('"', "\\\"")
                ),
                ("weight", "") => "weight 1".into(),
                ("together", "") => "together no".into(),
                ("repeat", value) if !value.is_empty() && !value.starts_with('"') => {
                    format!("repeat \"{value}\"")
                }
                (label, "") => format!("{label} none"),
                // Blanks after commas are how people write lists.
                ("needs" | "people" | "only" | "never" | "offers", value)
                    if !value.contains('"') =>
                {
                    let items = value
                        .split(',')
                        .map(str::trim)
                        .filter(|item| !item.is_empty());
                    let quoted = |item: &str| {
                        if item.contains(' ') {
                            format!("\"{item}\"")
                        } else {
                            item.to_string()
                        }
                    };
                    format!(
                        "{} {}",
                        field.label,
                        items.map(quoted).collect::<Vec<_>>().join(",")
                    )
                }
                (label, value) => format!("{label} {value}"),
            }
        };
        let Some(id) = &self.id else {
            let more: Vec<String> = self
                .fields
                .iter()
                .filter(|field| {
                    !matches!(field.label, "id" | "start" | "end")
                        && !field.input.value().trim().is_empty()
                })
                .map(said)
                .collect();
            let line = format!(
                "add {} from {} to {} {}",
                self.value("id"),
                self.value("start"),
                self.value("end"),
                more.join(" ")
            );
            return vec![line];
        };
        // Times are those of the piece, everything else is said of the whole request.
        let of = &self.of;
        let changed = |field: &&Entry| field.input.value().trim() != field.before.trim();
        let mut lines: Vec<String> = Vec::new();
        for field in self.fields.iter().filter(changed) {
            match field.label {
                "start" => lines.push(format!("move {id} to {}", field.input.value().trim())),
                "end" => {}
                _ => lines.push(format!("set {of} {}", said(field))),
            }
        }
        lines
    }
}

/// A key while the form is open.
pub(super) fn keyed(model: &mut Model, key: KeyEvent) -> Vec<Effect> {
    let control = key.modifiers.contains(KeyModifiers::CONTROL);
    let Mode::Form(form) = &mut model.mode else {
        return Vec::new();
    };
    let last = form.fields.len() - 1;
    match key.code {
        KeyCode::Esc => model.mode = Mode::Board,
        KeyCode::Char('c') if control => model.mode = Mode::Board,
        KeyCode::Tab | KeyCode::Down => form.chosen = (form.chosen + 1).min(last),
        KeyCode::BackTab | KeyCode::Up => form.chosen = form.chosen.saturating_sub(1),
        KeyCode::Enter => return apply(model),
        _ => {
            let chosen = form.chosen;
            typed(&mut form.fields[chosen].input, key);
        }
    }
    Vec::new()
}

/// Makes what the fields mean, as one step; what is refused leaves the form open.
fn apply(model: &mut Model) -> Vec<Effect> {
    let Mode::Form(form) = &model.mode else {
        return Vec::new();
    };
    let form = form.clone();
    let mut edits: Vec<Edit> = Vec::new();
    let mut lines = form.lines();
    match end_line(model, &form) {
        Ok(line) => lines.extend(line),
        Err(said) => {
            model.say(said, true);
            return Vec::new();
        }
    }
    for line in &lines {
        match model.desk.parse(line, model.now) {
            Ok(edit) => edits.push(edit),
            Err(misread) => {
                model.say(misread.message, true);
                return Vec::new();
            }
        }
    }
    let stays = std::mem::replace(&mut model.mode, Mode::Board);
    if edits.is_empty() {
        model.say("nothing was changed", false);
        return Vec::new();
    }
    let effects = make(model, edits);
    if effects.is_empty() {
        model.mode = stays;
    } else if form.id.is_none()
        && let Some(piece) = model.rows.find(form.value("id"))
    {
        model.take(piece);
    }
    effects
}

/// The end of a request as the length it means; a start that moves takes its end along
/// unless the end was changed too.
fn end_line(model: &Model, form: &Form) -> Result<Option<String>, String> {
    let changed = form
        .fields
        .iter()
        .find(|field| field.label == "end")
        .filter(|field| form.id.is_some() && field.input.value().trim() != field.before.trim());
    let (Some(id), Some(end)) = (&form.id, changed) else {
        return Ok(None);
    };
    // Read by the language itself: a stretch from the start to the end.
    let probe = format!(
        "add end-of-form from {} to {}",
        form.value("start"),
        end.input.value().trim()
    );
    match model.desk.parse(&probe, model.now) {
        Ok(Edit {
            what: crate::edit::Change::Add { span, .. },
            ..
        }) => {
            let length = crate::clock::print_length(span.seconds());
            Ok(Some(format!("set {id} length {length}")))
        }
        Ok(_) => Ok(None),
        Err(misread) => Err(misread.message),
    }
}
