//! Text from files and people is untrusted: cleaning, width in cells, cutting.
//!
//! Imports nothing from the crate.

use std::borrow::Cow;
use unicode_segmentation::UnicodeSegmentation;
use unicode_width::UnicodeWidthStr;

/// Whether a character may reach a terminal: no control characters and none that
/// reorder the text around them.
fn harmless(c: char) -> bool {
    !c.is_control()
        && !matches!(c,
            '\u{061C}' | '\u{200E}' | '\u{200F}' | '\u{2028}' | '\u{2029}' | '\u{FEFF}'
            | '\u{202A}'..='\u{202E}' | '\u{2066}'..='\u{2069}' | '\u{FFF9}'..='\u{FFFB}')
}

/// The text with every character that could steer a terminal shown as `?`.
pub fn clean(text: &str) -> Cow<'_, str> {
    if text.chars().all(harmless) {
        Cow::Borrowed(text)
    } else {
        Cow::Owned(
            text.chars()
                .map(|c| if harmless(c) { c } else { '?' })
                .collect(),
        )
    }
}

/// Cells that the cleaned text takes on the screen.
pub fn width(text: &str) -> usize {
    UnicodeWidthStr::width(text)
}

/// The longest run of whole graphemes that fits into `cells`.
fn fitting(text: &str, cells: usize) -> (&str, usize) {
    let mut used = 0;
    for (at, grapheme) in text.grapheme_indices(true) {
        let wide = width(grapheme);
        if used + wide > cells {
            return (&text[..at], used);
        }
        used += wide;
    }
    (text, used)
}

/// The cleaned text in exactly `cells` cells: cut with a final `~` or filled up with spaces.
pub fn fit(text: &str, cells: usize) -> String {
    // Far more characters than cells can never show; a huge title is not walked whole.
    let near: String = text.chars().take(cells.saturating_mul(8) + 8).collect();
    let shown = clean(&near);
    let (kept, used) = fitting(&shown, cells);
    if kept.len() == shown.len() && near.len() == text.len() {
        return format!("{kept}{}", " ".repeat(cells - used));
    }
    if cells == 0 {
        return String::new();
    }
    let (kept, used) = fitting(&shown, cells - 1);
    format!("{kept}~{}", " ".repeat(cells - 1 - used))
}

/// The cleaned text in at most `cells` cells, cut with a final `~`.
pub fn cut(text: &str, cells: usize) -> String {
    fit(text, cells).trim_end_matches(' ').to_string()
}

/// A sentence in lines of so many cells, broken between words where that is possible.
pub fn wrap(text: &str, room: usize) -> Vec<String> {
    let mut lines = vec![String::new()];
    for word in text.split(' ') {
        let Some(line) = lines.last_mut() else {
            continue;
        };
        let gap = usize::from(!line.is_empty());
        if line.is_empty() || width(line) + gap + width(word) <= room {
            if gap == 1 {
                line.push(' ');
            }
            line.push_str(word);
        } else {
            lines.push(word.to_string());
        }
    }
    lines.retain(|line| !line.is_empty());
    lines
}

/// The candidate nearest to a mistyped word, when one is near enough to suggest.
pub fn nearest<'a>(word: &str, candidates: impl Iterator<Item = &'a str>) -> Option<&'a str> {
    let most = (word.chars().count() / 3).clamp(1, 3);
    candidates
        .map(|candidate| (strsim::damerau_levenshtein(word, candidate), candidate))
        .min()
        .filter(|(distance, _)| *distance <= most)
        .map(|(_, candidate)| candidate)
}

/// Whether the text is an id: letters, digits, `_`, `.` and `-`, not empty.
pub fn is_id(text: &str) -> bool {
    !text.is_empty()
        && text.len() <= 200
        && text
            .chars()
            .all(|c| c.is_alphanumeric() || matches!(c, '_' | '.' | '-'))
}

#[cfg(test)]
mod tests {
    use super::*;

    #[test]
    fn every_text_fits_its_cells_exactly() {
        let long = "e\u{301}".repeat(10_000);
        for text in [
            "",
            "plain",
            "試験 \u{202E}gpj",
            "\u{1b}[31mred",
            "👩‍👩‍👧 a",
            "שלום",
            long.as_str(),
        ] {
            for cells in 0..20 {
                assert_eq!(width(&fit(text, cells)), cells, "{text:.10} in {cells}");
            }
        }
    }

    #[test]
    fn control_characters_are_shown_as_question_marks() {
        assert_eq!(clean("a\u{1b}[2Jb\u{9b}c\u{202E}d\n"), "a?[2Jb?c?d?");
    }

    #[test]
    fn near_words_are_found() {
        assert_eq!(
            nearest("tilte", ["title", "start"].into_iter()),
            Some("title")
        );
        assert_eq!(nearest("zebra", ["title", "start"].into_iter()), None);
    }
}
