//! Units as Liberty writes them: `1nW`, `"100mV"`, `mW`.

/// Value of a unit in SI; `symbol` is its letter, such as `W`. `None` when the text is no such unit.
pub fn unit(text: &str, symbol: char) -> Option<f64> {
    let text = text.trim();
    let digits = text.bytes().take_while(|b| b.is_ascii_digit() || b".+-eE".contains(b)).count();
    let size: f64 = if digits == 0 { 1.0 } else { text[..digits].parse().ok()? };
    let rest = text[digits..].trim();
    let last = rest.chars().last()?;
    if !last.eq_ignore_ascii_case(&symbol) {
        return None;
    }
    // dividing by an exact power keeps `1nW` equal to 1e-9
    let over = match &rest[..rest.len() - last.len_utf8()] {
        "" => 1.0,
        "k" | "K" => 1e-3,
        "m" => 1e3,
        "u" | "U" | "µ" => 1e6,
        "n" | "N" => 1e9,
        "p" | "P" => 1e12,
        "f" | "F" => 1e15,
        "a" | "A" => 1e18,
        _ => return None,
    };
    let value = size / over;
    (value > 0.0 && value.is_finite()).then_some(value)
}

/// The unit in words that [`unit()`] reads back.
pub fn unit_text(value: f64, symbol: char) -> String {
    for (prefix, over) in [("", 1.0), ("m", 1e3), ("u", 1e6), ("n", 1e9), ("p", 1e12), ("f", 1e15)] {
        for size in [1.0, 10.0, 100.0] {
            if value == size / over {
                return format!("{size}{prefix}{symbol}");
            }
        }
    }
    format!("{value:e}{symbol}")
}

#[cfg(test)]
mod tests {
    use super::*;

    #[test]
    fn units_are_read_and_written() {
        for (text, symbol, value) in [
            ("1nW", 'W', 1e-9),
            ("10pW", 'W', 1e-11),
            ("W", 'W', 1.0),
            (" 1 uW ", 'W', 1e-6),
            ("100mV", 'V', 0.1),
            ("1V", 'V', 1.0),
            ("1e-3W", 'W', 1e-3),
        ] {
            assert_eq!(unit(text, symbol), Some(value), "{text}");
            assert_eq!(unit(&unit_text(value, symbol), symbol), Some(value), "{text}");
        }
        for text in ["", "1nA", "nw nw", "1xW", "-1nW", "1", "0W", "1eW", "µ"] {
            assert_eq!(unit(text, 'W'), None, "{text}");
        }
    }
}
