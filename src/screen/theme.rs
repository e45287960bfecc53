//! Themes: what each role looks like at each depth of colour.

use ratatui::style::{Color, Modifier, Style};
use serde::Deserialize;

/// How many colours the terminal shows.
#[derive(Clone, Copy, Debug, PartialEq, Eq)]
pub enum Depth {
    /// Modifiers only.
    None,
    /// The sixteen named ones.
    Sixteen,
    /// The palette of 256.
    Palette,
    /// Red, green, blue.
    Full,
}

impl Depth {
    /// From the flag, else from the environment as `look` reads it: NO_COLOR (set and not
    /// empty), TERM, COLORTERM.
    ///
    /// # Errors
    /// A sentence when the flag is none of the depths.
    pub fn find(
        flag: Option<&str>,
        look: impl Fn(&str) -> Option<String>,
    ) -> Result<Depth, String> {
        match flag {
            Some("none") => return Ok(Depth::None),
            Some("16") => return Ok(Depth::Sixteen),
            Some("256") => return Ok(Depth::Palette),
            Some("full") => return Ok(Depth::Full),
            Some(_) => return Err("--colours takes none, 16, 256 or full".into()),
            None => {}
        }
        let term = look("TERM").unwrap_or_default();
        let colour_term = look("COLORTERM").unwrap_or_default();
        Ok(
            if look("NO_COLOR").is_some_and(|value| !value.is_empty())
                || term.is_empty()
                || term == "dumb"
            {
                Depth::None
            } else if matches!(colour_term.as_str(), "truecolor" | "24bit")
                || term.ends_with("-direct")
            {
                Depth::Full
            } else if term.contains("256color") {
                Depth::Palette
            } else {
                Depth::Sixteen
            },
        )
    }
}

/// A colour three ways: rgb, one of 256, one of the 16 by name.
#[derive(Clone, Deserialize)]
struct Colour(String, u8, String);

#[derive(Clone, Default, Deserialize)]
#[serde(deny_unknown_fields, default)]
struct Role {
    fg: Option<Colour>,
    bg: Option<Colour>,
    with: Vec<String>,
    mono: Vec<String>,
}

macro_rules! roles {
    ($($name:ident: $doc:literal),* $(,)?) => {
        #[derive(Deserialize)]
        #[serde(deny_unknown_fields, default)]
        #[derive(Default)]
        struct File { $($name: Role),* }

        /// The styles of all roles at one depth.
        #[derive(Clone, Debug)]
        pub struct Theme { $(#[doc = $doc] pub $name: Style),* }

        impl Theme {
            fn of(file: &File, depth: Depth) -> Result<Theme, String> {
                Ok(Theme { $($name: style(&file.$name, depth)?),* })
            }
        }
    };
}

roles! {
    title: "The timetable's title.",
    proved: "The state of knowledge when proved.",
    open: "The state while something is open.",
    impossible: "The state when not all fit.",
    axis: "The time axis.",
    label: "Row labels.",
    label_here: "The label of the row in hand.",
    bar: "A piece.",
    bar_clique: "A piece that the floor counts.",
    bar_clash: "A piece with a clash.",
    bar_here: "The piece in hand.",
    bar_carried: "The piece that is carried.",
    bar_withdrawn: "A withdrawn piece.",
    buffer: "Time kept free around a piece.",
    closed: "Time at which a resource is out.",
    load: "The load.",
    peak: "The load where it is largest.",
    floor: "The line of the floor.",
    hint: "Key hints.",
    warning: "Something to look at.",
    prompt: "What one types into.",
}

impl Theme {
    /// The theme of that name, or of a theme file's text.
    ///
    /// # Errors
    /// A sentence: what is wrong with the file.
    pub fn named(name: &str, depth: Depth) -> Option<Result<Theme, String>> {
        let text = match name {
            "daylight" => include_str!("../../themes/daylight.toml"),
            "ink" => include_str!("../../themes/ink.toml"),
            _ => return None,
        };
        Some(Theme::parse(text, depth))
    }

    /// The theme that a file describes.
    ///
    /// # Errors
    /// A sentence: what is wrong with it.
    pub fn parse(text: &str, depth: Depth) -> Result<Theme, String> {
        let file: File = toml_edit::de::from_str(text).map_err(|error| error.to_string())?;
        Theme::of(&file, depth)
    }
}

fn style(role: &Role, depth: Depth) -> Result<Style, String> {
    let mut style = Style::new();
    if depth == Depth::None {
        return modifiers(style, &role.mono);
    }
    if let Some(fg) = &role.fg {
        style = style.fg(colour(fg, depth)?);
    }
    if let Some(bg) = &role.bg {
        style = style.bg(colour(bg, depth)?);
    }
    modifiers(style, &role.with)
}

fn modifiers(mut style: Style, names: &[String]) -> Result<Style, String> {
    for name in names {
        style = style.add_modifier(match name.as_str() {
            "bold" => Modifier::BOLD,
            "dim" => Modifier::DIM,
            "italic" => Modifier::ITALIC,
            "underlined" => Modifier::UNDERLINED,
            "reversed" => Modifier::REVERSED,
            other => return Err(format!("there is no modifier {other:?}")),
        });
    }
    Ok(style)
}

fn colour(Colour(rgb, palette, name): &Colour, depth: Depth) -> Result<Color, String> {
    Ok(match depth {
        Depth::Full => {
            let digits = rgb.strip_prefix('#').filter(|digits| digits.len() == 6);
            let number = digits.and_then(|digits| u32::from_str_radix(digits, 16).ok());
            Color::from_u32(number.ok_or_else(|| format!("{rgb:?} is no colour such as #00875f"))?)
        }
        Depth::Palette => Color::Indexed(*palette),
        Depth::Sixteen | Depth::None => {
            // Indexed, because some terminals are sent 38;5;n for the names anyway.
            const NAMES: [&str; 8] = [
                "black", "red", "green", "yellow", "blue", "magenta", "cyan", "white",
            ];
            let plain = name.strip_prefix("bright-").unwrap_or(name);
            let at = NAMES.iter().position(|known| *known == plain);
            let at = at.ok_or_else(|| format!("{name:?} is none of the sixteen colours"))?;
            [
                [
                    Color::Black,
                    Color::Red,
                    Color::Green,
                    Color::Yellow,
                    Color::Blue,
                    Color::Magenta,
                    Color::Cyan,
                    Color::Gray,
                ],
                [
                    Color::DarkGray,
                    Color::LightRed,
                    Color::LightGreen,
                    Color::LightYellow,
                    Color::LightBlue,
                    Color::LightMagenta,
                    Color::LightCyan,
                    Color::White,
                ],
            ][usize::from(plain != name)][at]
        }
    })
}

#[cfg(test)]
mod tests {
    use super::*;

    #[test]
    fn every_theme_reads_at_every_depth() {
        for name in ["daylight", "ink"] {
            for depth in [Depth::None, Depth::Sixteen, Depth::Palette, Depth::Full] {
                let theme = Theme::named(name, depth).unwrap().unwrap();
                if depth == Depth::None || name == "ink" {
                    assert_eq!(
                        (theme.bar_here.fg, theme.bar_here.bg),
                        (None, None),
                        "{name}"
                    );
                }
                assert_ne!(
                    theme.bar_here, theme.bar,
                    "what is in hand can be told apart"
                );
            }
        }
        assert!(Theme::named("neon", Depth::None).is_none());
        assert!(Theme::parse("[bar]\nmono = [\"blinking\"]\n", Depth::None).is_err());
        assert!(Theme::parse("[bars]\n", Depth::None).is_err());
    }

    #[test]
    fn the_depth_follows_flag_and_environment() {
        let find = |flag, pairs: &[(&str, &str)]| {
            Depth::find(flag, |key| {
                pairs
                    .iter()
                    .find(|(name, _)| *name == key)
                    .map(|(_, value)| value.to_string())
            })
        };
        assert_eq!(find(None, &[("TERM", "xterm")]), Ok(Depth::Sixteen));
        assert_eq!(
            find(None, &[("TERM", "xterm-256color")]),
            Ok(Depth::Palette)
        );
        assert_eq!(
            find(
                None,
                &[("TERM", "xterm-256color"), ("COLORTERM", "truecolor")]
            ),
            Ok(Depth::Full)
        );
        assert_eq!(
            find(None, &[("TERM", "xterm-256color"), ("NO_COLOR", "1")]),
            Ok(Depth::None)
        );
        assert_eq!(
            find(None, &[("TERM", "dumb"), ("COLORTERM", "truecolor")]),
            Ok(Depth::None)
        );
        assert_eq!(find(Some("256"), &[("NO_COLOR", "1")]), Ok(Depth::Palette));
        assert!(find(Some("many"), &[]).is_err());
    }
}
