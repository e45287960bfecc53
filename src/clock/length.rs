//! Lengths of time as people write them: `45s`, `5m`, `1h30m`, `1d`.

use thiserror::Error;

/// Why a text is no length.
#[derive(Debug, Error, PartialEq, Eq)]
pub enum LengthError {
    /// Not of the form number, unit, number, unit ...
    #[error("is not a length of time; write it like \"45s\", \"5m\", \"1h30m\" or \"1d\"")]
    Form,
    /// Longer than ten years.
    #[error("is longer than ten years")]
    TooLong,
}

const UNITS: [(char, i64); 4] = [('d', 86_400), ('h', 3_600), ('m', 60), ('s', 1)];

/// Reads a length, in seconds: units `d h m s`, each at most once, largest first.
///
/// # Errors
/// [`LengthError`] when the form is another or it exceeds ten years.
pub fn parse_length(text: &str) -> Result<i64, LengthError> {
    let mut rest = text;
    let mut total: i64 = 0;
    let mut units = UNITS.iter();
    if rest.is_empty() {
        return Err(LengthError::Form);
    }
    while !rest.is_empty() {
        let digits = rest.bytes().take_while(u8::is_ascii_digit).count();
        let (number, after) = rest.split_at(digits);
        let unit = after.chars().next().ok_or(LengthError::Form)?;
        if digits == 0 {
            return Err(LengthError::Form);
        }
        let (_, seconds) = units
            .find(|(name, _)| *name == unit)
            .ok_or(LengthError::Form)?;
        let number: i64 = number.parse().map_err(|_| LengthError::TooLong)?;
        total = number
            .checked_mul(*seconds)
            .and_then(|part| total.checked_add(part))
            .filter(|total| *total <= 3_660 * 86_400)
            .ok_or(LengthError::TooLong)?;
        rest = &after[1..];
    }
    Ok(total)
}

/// Writes a length of `seconds` (not negative) in the form that [`parse_length`] reads.
pub fn print_length(seconds: i64) -> String {
    if seconds == 0 {
        return "0m".into();
    }
    let mut rest = seconds;
    let mut text = String::new();
    for (name, unit) in UNITS {
        if rest >= unit {
            text.push_str(&(rest / unit).to_string());
            text.push(name);
            rest %= unit;
        }
    }
    text
}

#[cfg(test)]
mod tests {
    use super::*;

    #[test]
    fn reads_the_forms_of_the_contract() {
        assert_eq!(parse_length("45s"), Ok(45));
        assert_eq!(parse_length("5m"), Ok(300));
        assert_eq!(parse_length("1h30m"), Ok(5_400));
        assert_eq!(parse_length("90m"), Ok(5_400));
        assert_eq!(parse_length("1d"), Ok(86_400));
        assert_eq!(parse_length("0m"), Ok(0));
        for bad in [
            "", "5", "m", "1m2h", "1h1h", "-5m", "5 m", "1.5h", "5M", "1hm",
        ] {
            assert_eq!(parse_length(bad), Err(LengthError::Form), "{bad}");
        }
        for bad in ["99999999999999999999d", "4000d", "9223372036854775807m"] {
            assert_eq!(parse_length(bad), Err(LengthError::TooLong), "{bad}");
        }
    }

    #[test]
    fn printing_then_reading_is_the_identity() {
        for seconds in [0, 1, 59, 60, 61, 3_600, 5_400, 86_399, 86_400, 90_061] {
            assert_eq!(parse_length(&print_length(seconds)), Ok(seconds));
        }
    }
}
