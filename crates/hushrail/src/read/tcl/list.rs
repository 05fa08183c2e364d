//! Lists: words in a text, with braces, quotes and backslashes.

use super::value::Value;

/// The elements of a list; each keeps its place where the list was written as it is.
///
/// The error is the byte at which the list goes wrong and what is wrong there.
pub(super) fn elements(list: &Value) -> Result<Vec<Value>, (usize, &'static str)> {
    let text = list.text();
    let bytes = text.as_bytes();
    let mut out = Vec::new();
    let mut i = 0;
    loop {
        while bytes.get(i).is_some_and(|b| is_blank(bytes, i) || *b == b'\n') {
            i += 1;
        }
        let Some(&first) = bytes.get(i) else { return Ok(out) };
        let start = i;
        match first {
            b'{' => {
                let end = brace_end(bytes, i).ok_or((start, "a brace that is not closed"))?;
                out.push(list.slice(i + 1, end));
                i = end + 1;
            }
            b'"' => {
                i += 1;
                while bytes.get(i).is_some_and(|b| *b != b'"') {
                    i += if bytes[i] == b'\\' { 2 } else { 1 };
                }
                if i >= bytes.len() {
                    return Err((start, "a quote that is not closed"));
                }
                out.push(unescaped(list, start + 1, i));
                i += 1;
            }
            _ => {
                while bytes.get(i).is_some_and(|b| !is_blank(bytes, i) && *b != b'\n') {
                    i += if bytes[i] == b'\\' { 2 } else { 1 };
                }
                i = i.min(bytes.len());
                out.push(unescaped(list, start, i));
                continue;
            }
        }
        if bytes.get(i).is_some_and(|b| !is_blank(bytes, i) && *b != b'\n') {
            return Err((i, "text right behind a brace or quote that closes an element"));
        }
    }
}

/// A blank; a backslash before the end of a line is one.
pub(super) fn is_blank(bytes: &[u8], i: usize) -> bool {
    match bytes[i] {
        b' ' | b'\t' | b'\r' | 0x0b | 0x0c => true,
        b'\\' => continuation(bytes, i).is_some(),
        _ => false,
    }
}

/// The length of a backslash with the end of its line.
pub(super) fn continuation(bytes: &[u8], i: usize) -> Option<usize> {
    match bytes.get(i..) {
        Some([b'\\', b'\n', ..]) => Some(2),
        Some([b'\\', b'\r', b'\n', ..]) => Some(3),
        _ => None,
    }
}

/// Where the brace that opens at `i` is closed.
pub(super) fn brace_end(bytes: &[u8], i: usize) -> Option<usize> {
    let mut depth = 0usize;
    let mut k = i;
    while let Some(&b) = bytes.get(k) {
        match b {
            b'\\' => k += 1,
            b'{' => depth += 1,
            b'}' => {
                depth -= 1;
                if depth == 0 {
                    return Some(k);
                }
            }
            _ => {}
        }
        k += 1;
    }
    None
}

fn unescaped(list: &Value, from: usize, to: usize) -> Value {
    let piece = list.slice(from, to);
    if !piece.text().contains('\\') {
        return piece;
    }
    let mut out = String::with_capacity(piece.text().len());
    let mut rest = piece.text();
    while let Some(at) = rest.find('\\') {
        out.push_str(&rest[..at]);
        let (c, used) = escape(&rest[at..]);
        out.push(c);
        rest = rest.get(at + used..).unwrap_or_default();
    }
    out.push_str(rest);
    Value::new(out, piece.spot())
}

/// What a text that begins with a backslash stands for, and its length.
pub(super) fn escape(text: &str) -> (char, usize) {
    let mut rest = text.chars().skip(1);
    let hex = |skip: usize, most: usize, empty: char| {
        let digits: String = text.chars().skip(skip).take_while(char::is_ascii_hexdigit).take(most).collect();
        match u32::from_str_radix(&digits, 16).ok().and_then(char::from_u32) {
            Some(c) => (c, skip + digits.len()),
            None => (empty, skip),
        }
    };
    match rest.next() {
        None => ('\\', 1),
        Some('a') => ('\u{7}', 2),
        Some('b') => ('\u{8}', 2),
        Some('f') => ('\u{c}', 2),
        Some('n') => ('\n', 2),
        Some('r') => ('\r', 2),
        Some('t') => ('\t', 2),
        Some('v') => ('\u{b}', 2),
        Some('x') => hex(2, 2, 'x'),
        Some('u') => hex(2, 4, 'u'),
        Some(c @ '0'..='7') => {
            let digits = text.bytes().skip(1).take(3).take_while(|b| (b'0'..=b'7').contains(b)).count();
            let value = u32::from_str_radix(&text[1..=digits], 8).ok().and_then(char::from_u32);
            (value.unwrap_or(c), 1 + digits)
        }
        Some('\n') => (' ', 2 + blanks(&text[2..])),
        Some('\r') if text.as_bytes().get(2) == Some(&b'\n') => (' ', 3 + blanks(&text[3..])),
        Some(c) => (c, 1 + c.len_utf8()),
    }
}

fn blanks(text: &str) -> usize {
    text.bytes().take_while(|b| matches!(b, b' ' | b'\t')).count()
}

/// An element as it stands in a list.
pub(super) fn quoted(text: &str) -> String {
    let special = |c: char| c.is_ascii_whitespace() || "{}[]$\";\\".contains(c);
    if !text.is_empty() && !text.starts_with('#') && !text.contains(special) {
        return text.to_owned();
    }
    let braced = format!("{{{text}}}");
    if brace_end(braced.as_bytes(), 0) == Some(braced.len() - 1) && !text.ends_with('\\') {
        return braced;
    }
    let mut out = String::with_capacity(text.len() + 8);
    for c in text.chars() {
        match c {
            '\n' => out.push_str("\\n"),
            '\t' => out.push_str("\\t"),
            '\r' => out.push_str("\\r"),
            c => {
                if special(c) || c == '#' {
                    out.push('\\');
                }
                out.push(c);
            }
        }
    }
    out
}

/// A list of these elements.
pub(in crate::read) fn join<'a>(parts: impl IntoIterator<Item = &'a str>) -> String {
    let mut out = String::new();
    for (i, part) in parts.into_iter().enumerate() {
        if i > 0 {
            out.push(' ');
        }
        out.push_str(&quoted(part));
    }
    out
}

/// Whether a text fits a pattern with `*`, `?`, `[a-z]` and backslashes.
pub(in crate::read) fn fits(pattern: &str, text: &str) -> bool {
    let (p, t): (Vec<char>, Vec<char>) = (pattern.chars().collect(), text.chars().collect());
    let (mut i, mut k) = (0, 0);
    // where to go on after the last star
    let mut back: Option<(usize, usize)> = None;
    while k < t.len() {
        let step = match p.get(i) {
            Some('*') => {
                back = Some((i + 1, k));
                i += 1;
                continue;
            }
            Some('?') => Some(1),
            Some('[') => class(&p[i..], t[k]),
            Some('\\') if i + 1 < p.len() => (p[i + 1] == t[k]).then_some(2),
            Some(c) => (*c == t[k]).then_some(1),
            None => None,
        };
        match (step, back) {
            (Some(n), _) => {
                i += n;
                k += 1;
            }
            (None, Some((star, from))) => {
                i = star;
                k = from + 1;
                back = Some((star, k));
            }
            (None, None) => return false,
        }
    }
    p[i..].iter().all(|c| *c == '*')
}

/// The length of a set of characters that `c` is in.
fn class(pattern: &[char], c: char) -> Option<usize> {
    let end = pattern.iter().position(|p| *p == ']')?;
    let inside = &pattern[1..end];
    let mut i = 0;
    while i < inside.len() {
        if inside.get(i + 1) == Some(&'-') && i + 2 < inside.len() {
            if (inside[i]..=inside[i + 2]).contains(&c) {
                return Some(end + 1);
            }
            i += 3;
        } else {
            if inside[i] == c {
                return Some(end + 1);
            }
            i += 1;
        }
    }
    None
}
