//! SPICE numbers: a decimal with an optional scale suffix; letters after the suffix are units and carry no value.

/// Scale suffixes of SPICE, longest first; case is ignored.
const SUFFIXES: [(&str, f64); 11] = [
    ("meg", 1e6),
    ("mil", 25.4e-6),
    ("t", 1e12),
    ("g", 1e9),
    ("k", 1e3),
    ("m", 1e-3),
    ("u", 1e-6),
    ("n", 1e-9),
    ("p", 1e-12),
    ("f", 1e-15),
    ("a", 1e-18),
];

/// Reads a number at the start of `text`; returns its value and its length in bytes.
///
/// `None` when the text does not start with a number. `1.5u`, `.00e-9`, `2meg`, `10pF` and `1e+06u` are numbers.
pub fn leading_number(text: &str) -> Option<(f64, usize)> {
    let b = text.as_bytes();
    let digits = |mut i: usize| {
        while b.get(i).is_some_and(u8::is_ascii_digit) {
            i += 1;
        }
        i
    };
    let whole = digits(0);
    let mut end = whole;
    if b.get(end) == Some(&b'.') {
        end = digits(end + 1);
        if end == whole + 1 && whole == 0 {
            return None;
        }
    }
    if end == 0 {
        return None;
    }
    if matches!(b.get(end), Some(b'e' | b'E')) {
        let sign = usize::from(matches!(b.get(end + 1), Some(b'+' | b'-')));
        let stop = digits(end + 1 + sign);
        if stop > end + 1 + sign {
            end = stop;
        }
    }
    let value: f64 = text[..end].parse().ok()?;
    let letters = b[end..].iter().take_while(|c| c.is_ascii_alphanumeric() || **c == b'_').count();
    let tail = text[end..end + letters].to_ascii_lowercase();
    let scale = SUFFIXES.iter().find(|(s, _)| tail.starts_with(s)).map_or(1.0, |(_, f)| *f);
    if tail.bytes().any(|c| c.is_ascii_digit() || c == b'_') {
        return None; // 2n_x is a name, not a number
    }
    // dividing by an exact power keeps 650000u equal to 0.65
    let scaled = if scale < 1.0 && scale != 25.4e-6 { value / (1.0 / scale).round() } else { value * scale };
    Some((scaled, end + letters))
}

/// The value of `text` when all of it is one number, with an optional sign.
pub fn whole_number(text: &str) -> Option<f64> {
    let (sign, body) = match text.as_bytes().first()? {
        b'-' => (-1.0, &text[1..]),
        b'+' => (1.0, &text[1..]),
        _ => (1.0, text),
    };
    leading_number(body).filter(|&(_, len)| len == body.len()).map(|(v, _)| sign * v)
}

#[cfg(test)]
mod tests {
    use super::*;

    #[test]
    fn suffixes_scale_and_units_are_ignored() {
        let cases = [
            ("1", 1.0),
            (".00e-9", 0.0),
            ("1.0u", 1e-6),
            ("650000u", 0.65),
            ("1e+06u", 1.0),
            ("2meg", 2e6),
            ("2MEGohm", 2e6),
            ("10pF", 1e-11),
            ("1.8V", 1.8),
            ("3m", 3e-3),
            ("5.", 5.0),
            ("1mil", 25.4e-6),
            ("4.347e+11p", 0.4347),
        ];
        for (text, want) in cases {
            let (got, len) = leading_number(text).expect(text);
            assert_eq!(len, text.len(), "{text}");
            assert!((got - want).abs() <= 1e-15 * want.abs(), "{text}: {got}");
        }
        for bad in ["", ".", "x1", "-", "e5", "2n_x"] {
            assert_eq!(leading_number(bad), None, "{bad}");
        }
        assert_eq!(whole_number("-1.5k"), Some(-1500.0));
        assert_eq!(whole_number("1.5 k"), None);
    }
}
