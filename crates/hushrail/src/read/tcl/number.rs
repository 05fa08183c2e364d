//! Numbers and truth values of the language.

/// A number.
#[derive(Debug, Clone, Copy, PartialEq)]
pub(super) enum Number {
    Whole(i64),
    Real(f64),
}

impl Number {
    pub(super) fn real(self) -> f64 {
        match self {
            Self::Whole(n) => n as f64,
            Self::Real(x) => x,
        }
    }

    pub(super) fn text(self) -> String {
        match self {
            Self::Whole(n) => n.to_string(),
            Self::Real(x) => real_text(x),
        }
    }
}

/// A real number as text: always recognisable as one.
pub(super) fn real_text(x: f64) -> String {
    if x.is_nan() {
        return "NaN".into();
    }
    if x.is_infinite() {
        return if x > 0.0 { "Inf".into() } else { "-Inf".into() };
    }
    let size = x.abs();
    let text = if size != 0.0 && !(1e-4..1e17).contains(&size) { format!("{x:e}") } else { format!("{x}") };
    if text.contains(['.', 'e']) { text } else { text + ".0" }
}

/// The number a whole text is.
pub(super) fn number(text: &str) -> Option<Number> {
    let text = text.trim_matches(|c: char| c.is_ascii_whitespace());
    let (sign, body) = match text.as_bytes().first()? {
        b'-' => ("-", &text[1..]),
        b'+' => ("", &text[1..]),
        _ => ("", text),
    };
    let radix = |digits: &str, radix: u32| {
        let fits = !digits.is_empty() && digits.chars().all(|c| c.is_digit(radix));
        fits.then(|| i64::from_str_radix(&format!("{sign}{digits}"), radix).ok().map(Number::Whole))
    };
    let prefix = body.get(..2).map(str::to_ascii_lowercase);
    if let (Some(prefix), Some(digits)) = (prefix, body.get(2..)) {
        let base = match prefix.as_str() {
            "0x" => 16,
            "0b" => 2,
            "0o" => 8,
            _ => 0,
        };
        if base > 0 {
            return radix(digits, base)?;
        }
    }
    if let Some(whole) = radix(body, 10).flatten() {
        return Some(whole);
    }
    let numeric = body.bytes().next().is_some_and(|b| b.is_ascii_digit() || b == b'.')
        && body.bytes().all(|b| b.is_ascii_digit() || b".eE+-".contains(&b));
    let x: f64 = if numeric { format!("{sign}{body}").parse().ok()? } else { return None };
    x.is_finite().then_some(Number::Real(x))
}

/// The truth value a text stands for.
pub(super) fn truth(text: &str) -> Option<bool> {
    match text.trim().to_ascii_lowercase().as_str() {
        "true" | "yes" | "on" => Some(true),
        "false" | "no" | "off" => Some(false),
        _ => number(text).map(|n| n.real() != 0.0),
    }
}
