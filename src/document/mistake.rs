//! What is wrong with a file, where, and what to do about it.

use crate::text::{clean, fit, width};
use std::fmt::Write;
use std::ops::Range;

/// One mistake (or warning) at a place in the text.
#[derive(Clone, Debug, PartialEq, Eq)]
pub struct Mistake {
    /// Bytes concerned.
    pub at: Range<usize>,
    /// What is wrong and what to do.
    pub message: String,
}

/// All that is wrong with one file.
#[derive(Clone, Debug, PartialEq, Eq)]
pub struct Mistakes {
    /// The file's name as given.
    pub file: String,
    /// Its text, for showing the lines.
    pub text: String,
    /// In order of place; never empty.
    pub list: Vec<Mistake>,
}

/// So many are written out; the rest are counted.
const MOST_SHOWN: usize = 50;

/// Columns of an excerpt.
const EXCERPT: usize = 100;

impl Mistake {
    /// Line and column, from 1; the column counts characters.
    pub fn line_and_column(&self, text: &str) -> (usize, usize) {
        let at = floor_boundary(text, self.at.start);
        let line_start = text[..at].rfind('\n').map_or(0, |newline| newline + 1);
        let line = text[..at].matches('\n').count() + 1;
        (line, text[line_start..at].chars().count() + 1)
    }

    /// `FILE:LINE:COLUMN: message`, the line, and a mark under the place.
    pub fn show(&self, file: &str, text: &str) -> String {
        let (line, column) = self.line_and_column(text);
        let mut shown = format!(
            "{}:{line}:{column}: {}\n",
            clean(file),
            clean(&self.message)
        );
        let at = floor_boundary(text, self.at.start);
        let start = text[..at].rfind('\n').map_or(0, |newline| newline + 1);
        let content = text[start..].lines().next().unwrap_or("");
        if content.is_empty() {
            return shown;
        }
        let end = floor_boundary(
            text,
            self.at.end.clamp(at, start + content.len().max(at - start)),
        );
        // A place far along a very long line is shown with the line's beginning cut off.
        let before = clean(&text[start..at]).into_owned();
        let skipped = width(&before).saturating_sub(EXCERPT / 2);
        let kept: String = if skipped > 0 {
            before
                .chars()
                .rev()
                .take(EXCERPT / 2)
                .collect::<Vec<_>>()
                .into_iter()
                .rev()
                .collect()
        } else {
            before
        };
        let number = line.to_string();
        let rest = fit(
            text[at..].lines().next().unwrap_or(""),
            EXCERPT - width(&kept).min(EXCERPT),
        );
        let marks = width(&clean(&text[at..end])).clamp(1, EXCERPT - width(&kept).min(EXCERPT - 1));
        let _ = writeln!(shown, "  {number} | {kept}{}", rest.trim_end());
        let _ = writeln!(
            shown,
            "  {} | {}{}",
            " ".repeat(number.len()),
            " ".repeat(width(&kept)),
            "^".repeat(marks)
        );
        shown
    }
}

/// The nearest character boundary at or before a byte.
fn floor_boundary(text: &str, at: usize) -> usize {
    let mut at = at.min(text.len());
    while !text.is_char_boundary(at) {
        at -= 1;
    }
    at
}

impl std::fmt::Display for Mistakes {
    fn fmt(&self, f: &mut std::fmt::Formatter<'_>) -> std::fmt::Result {
        for mistake in self.list.iter().take(MOST_SHOWN) {
            f.write_str(&mistake.show(&self.file, &self.text))?;
        }
        if self.list.len() > MOST_SHOWN {
            writeln!(f, "and {} more", self.list.len() - MOST_SHOWN)?;
        }
        Ok(())
    }
}

impl std::error::Error for Mistakes {}
