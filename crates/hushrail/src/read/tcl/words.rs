//! Commands and words: cutting a script, substituting, and running what comes out.

use super::builtin;
use super::list::{self, brace_end, continuation, escape, is_blank};
use super::value::{Origin, Spot, Value, Word};
use super::{Host, Interpreter, Outcome, Stop, short};

/// A walk through a script.
pub(super) struct Cursor<'a> {
    pub(super) script: &'a Value,
    pub(super) pos: usize,
}

impl Cursor<'_> {
    pub(super) fn bytes(&self) -> &[u8] {
        self.script.text().as_bytes()
    }

    pub(super) fn peek(&self) -> Option<u8> {
        self.bytes().get(self.pos).copied()
    }

    pub(super) fn spot(&self) -> Spot {
        self.script.spot_of(self.pos)
    }
}

/// Runs all commands of a script.
pub(super) fn script(tcl: &mut Interpreter, host: &mut dyn Host, script: &Value) -> Outcome {
    let mut cursor = Cursor { script, pos: 0 };
    let mut last = Value::new("", script.spot());
    while let Some(words) = command(tcl, host, &mut cursor, false, true)? {
        if !words.is_empty() {
            last = run(tcl, host, &words)?;
        }
    }
    Ok(last)
}

/// Runs the commands of a bracket; the cursor stands on it and ends behind it. Without `live` nothing is run.
pub(super) fn bracket(
    tcl: &mut Interpreter,
    host: &mut dyn Host,
    cursor: &mut Cursor<'_>,
    live: bool,
) -> Outcome {
    let open = cursor.spot();
    cursor.pos += 1;
    tcl.deeper(open, |tcl| {
        let mut last = Value::new("", open);
        while let Some(words) = command(tcl, host, cursor, true, live)? {
            if live && !words.is_empty() {
                last = run(tcl, host, &words)?;
            }
        }
        if cursor.peek() != Some(b']') {
            return Err(tcl.wrong(open, "a bracket that is not closed", "close it with `]`"));
        }
        cursor.pos += 1;
        Ok(last)
    })
}

fn run(tcl: &mut Interpreter, host: &mut dyn Host, words: &[Word]) -> Outcome {
    let Some(name) = words.first() else { return Ok(Value::new("", Spot::default())) };
    tcl.spend(0, name.at)?;
    let plain = name.text().strip_prefix("::").unwrap_or(name.text());
    if let Some(procedure) = tcl.procedures.get(plain).cloned() {
        return super::control::call(tcl, host, &procedure, words);
    }
    if let Some(outcome) = builtin::call(tcl, host, plain, words) {
        return outcome;
    }
    if let Some(outcome) = host.call(tcl, words) {
        return outcome;
    }
    if builtin::REFUSED.contains(&plain) {
        return Err(tcl.wrong(
            name.at,
            format!("the Tcl command `{plain}` is not offered"),
            "want plain Tcl without files, processes, namespaces and regular expressions",
        ));
    }
    let mut known: Vec<&str> = host.names();
    known.extend(builtin::NAMES);
    known.extend(tcl.procedures.keys().map(String::as_str));
    known.sort_unstable();
    Err(tcl.unknown(name.at, "command", name.text(), known))
}

/// The words of the next command, which may be none; nothing at the end of the script or bracket.
fn command(
    tcl: &mut Interpreter,
    host: &mut dyn Host,
    cursor: &mut Cursor<'_>,
    in_bracket: bool,
    live: bool,
) -> Result<Option<Vec<Word>>, Stop> {
    // between commands
    loop {
        match cursor.peek() {
            None => return Ok(None),
            Some(b']') if in_bracket => return Ok(None),
            Some(b'\n' | b';') => cursor.pos += 1,
            Some(0xef) if cursor.script.text()[cursor.pos..].starts_with('\u{feff}') && cursor.pos == 0 => {
                cursor.pos += 3;
            }
            Some(_) if is_blank(cursor.bytes(), cursor.pos) => {
                cursor.pos += continuation(cursor.bytes(), cursor.pos).unwrap_or(1);
            }
            Some(b'#') => {
                while cursor.peek().is_some_and(|b| b != b'\n') {
                    cursor.pos += match cursor.peek() {
                        Some(b'\\') => continuation(cursor.bytes(), cursor.pos).unwrap_or(2),
                        _ => 1,
                    };
                }
                cursor.pos = cursor.pos.min(cursor.bytes().len());
                // an escaped character may have several bytes
                while !cursor.script.text().is_char_boundary(cursor.pos) {
                    cursor.pos += 1;
                }
            }
            Some(_) => break,
        }
    }
    let mut words = Vec::new();
    loop {
        while cursor.peek().is_some() && is_blank(cursor.bytes(), cursor.pos) {
            let skip = continuation(cursor.bytes(), cursor.pos);
            if skip.is_some_and(|n| cursor.pos + n >= cursor.bytes().len()) && !in_bracket {
                return Err(tcl.wrong(
                    cursor.spot(),
                    "the text ends behind a backslash that continues the line",
                    "want the rest of the command; is the file cut off?",
                ));
            }
            cursor.pos += skip.unwrap_or(1);
        }
        match cursor.peek() {
            None | Some(b'\n' | b';') => return Ok(Some(words)),
            Some(b']') if in_bracket => return Ok(Some(words)),
            Some(_) => {}
        }
        let at = cursor.spot();
        let spread = cursor.script.text()[cursor.pos..].starts_with("{*}")
            && cursor
                .bytes()
                .get(cursor.pos + 3)
                .is_some_and(|b| *b != b'\n' && !is_blank(cursor.bytes(), cursor.pos + 3));
        if spread {
            cursor.pos += 3;
            let value = word(tcl, host, cursor, in_bracket, live)?;
            if live {
                words.extend(tcl.list(&value)?.into_iter().map(|value| Word { at: value.spot(), value }));
            }
        } else {
            let value = word(tcl, host, cursor, in_bracket, live)?;
            words.push(Word { value, at });
        }
    }
}

fn word(
    tcl: &mut Interpreter,
    host: &mut dyn Host,
    cursor: &mut Cursor<'_>,
    in_bracket: bool,
    live: bool,
) -> Outcome {
    let value = match cursor.peek() {
        Some(b'{') => braced(tcl, cursor)?,
        Some(b'"') => quoted(tcl, host, cursor, live)?,
        _ => {
            let stop = |bytes: &[u8], i: usize| {
                matches!(bytes[i], b'\n' | b';') || (in_bracket && bytes[i] == b']') || is_blank(bytes, i)
            };
            return substitute(tcl, host, cursor, live, &stop);
        }
    };
    let ends = match cursor.peek() {
        None | Some(b'\n' | b';') => true,
        Some(b']') => in_bracket,
        Some(_) => is_blank(cursor.bytes(), cursor.pos),
    };
    if ends {
        return Ok(value);
    }
    Err(tcl.wrong(
        cursor.spot(),
        "text right behind a brace or quote that closes a word",
        "want a blank between them",
    ))
}

/// A word in braces, as it stands.
pub(super) fn braced(tcl: &mut Interpreter, cursor: &mut Cursor<'_>) -> Outcome {
    let open = cursor.pos;
    let Some(end) = brace_end(cursor.bytes(), open) else {
        return Err(tcl.wrong(
            cursor.spot(),
            "a brace that is not closed",
            "close it with `}`; is the file cut off?",
        ));
    };
    cursor.pos = end + 1;
    let mut value = cursor.script.slice(open + 1, end);
    tcl.spend(value.text().len(), value.spot())?;
    if value.text().contains("\\\n") || value.text().contains("\\\r\n") {
        // as many blanks as bytes, so that places hold
        value.text = value.text().replace("\\\r\n", "   ").replace("\\\n", "  ").into();
    }
    Ok(value)
}

/// A word in quotes, substituted.
pub(super) fn quoted(
    tcl: &mut Interpreter,
    host: &mut dyn Host,
    cursor: &mut Cursor<'_>,
    live: bool,
) -> Outcome {
    let open = cursor.spot();
    cursor.pos += 1;
    let value = substitute(tcl, host, cursor, live, &|bytes, i| bytes[i] == b'"')?;
    if cursor.peek() != Some(b'"') {
        return Err(tcl.wrong(
            open,
            "a quote that is not closed",
            "close it with `\"`; is the file cut off?",
        ));
    }
    cursor.pos += 1;
    Ok(value)
}

/// Text up to where `stop` says, with variables, brackets and backslashes replaced.
pub(super) fn substitute(
    tcl: &mut Interpreter,
    host: &mut dyn Host,
    cursor: &mut Cursor<'_>,
    live: bool,
    stop: &dyn Fn(&[u8], usize) -> bool,
) -> Outcome {
    let start = cursor.pos;
    let at = cursor.spot();
    let mut text = String::new();
    let mut pieces: Vec<(usize, Spot, bool)> = Vec::new();
    let mut whole: Option<Value> = None;
    let mut plain = cursor.pos;
    let keep = |cursor: &Cursor<'_>, from: usize, text: &mut String, pieces: &mut Vec<_>| {
        if cursor.pos > from {
            pieces.push((text.len(), cursor.script.spot_of(from), true));
            text.push_str(cursor.script.text().get(from..cursor.pos).unwrap_or_default());
        }
    };
    while let Some(b) = cursor.peek() {
        if stop(cursor.bytes(), cursor.pos) {
            break;
        }
        let value = match b {
            b'$' => {
                let from = cursor.pos;
                match variable(tcl, host, cursor, live)? {
                    Some(value) => {
                        let end = std::mem::replace(&mut cursor.pos, from);
                        keep(cursor, plain, &mut text, &mut pieces);
                        cursor.pos = end;
                        value
                    }
                    None => continue,
                }
            }
            b'[' => {
                keep(cursor, plain, &mut text, &mut pieces);
                bracket(tcl, host, cursor, live)?
            }
            b'\\' => {
                keep(cursor, plain, &mut text, &mut pieces);
                let spot = cursor.spot();
                let (c, used) = escape(&cursor.script.text()[cursor.pos..]);
                cursor.pos += used;
                Value::new(c.to_string(), spot)
            }
            _ => {
                cursor.pos += 1;
                continue;
            }
        };
        plain = cursor.pos;
        let first = text.is_empty() && whole.is_none() && pieces.is_empty();
        // a piece keeps its own places
        match &value.origin {
            Origin::Exact => pieces.push((text.len(), value.spot(), true)),
            Origin::Made => pieces.push((text.len(), value.spot(), false)),
            Origin::Pieces(inner) => pieces.extend(inner.iter().map(|p| (p.0 + text.len(), p.1, p.2))),
        }
        tcl.spend(value.text().len(), at)?;
        text.push_str(value.text());
        whole = first.then_some(value);
    }
    if plain == start {
        return Ok(cursor.script.slice(start, cursor.pos));
    }
    if plain == cursor.pos
        && let Some(value) = whole.filter(|v| v.text().len() == text.len())
    {
        return Ok(value);
    }
    keep(cursor, plain, &mut text, &mut pieces);
    tcl.spend(text.len(), at)?;
    Ok(Value { text: text.into(), spot: at, origin: Origin::Pieces(pieces.into()) })
}

/// The value of a variable; nothing, with the cursor one on, when the dollar is just that.
pub(super) fn variable(
    tcl: &mut Interpreter,
    host: &mut dyn Host,
    cursor: &mut Cursor<'_>,
    live: bool,
) -> Result<Option<Value>, Stop> {
    let at = cursor.spot();
    let start = cursor.pos + 1;
    if cursor.bytes().get(start) == Some(&b'{') {
        let Some(end) = cursor.bytes()[start..].iter().position(|b| *b == b'}') else {
            return Err(tcl.wrong(
                at,
                "a brace that is not closed",
                "close the name of the variable with `}`",
            ));
        };
        let name = cursor.script.slice(start + 1, start + end);
        cursor.pos = start + end + 1;
        return if live { tcl.get(name.text(), at).map(Some) } else { Ok(Some(Value::new("", at))) };
    }
    let bytes = cursor.bytes();
    let mut end = start;
    while let Some(&b) = bytes.get(end) {
        if b.is_ascii_alphanumeric() || b == b'_' {
            end += 1;
        } else if b == b':' && bytes.get(end + 1) == Some(&b':') {
            end += 2;
        } else {
            break;
        }
    }
    if end == start {
        cursor.pos += 1;
        return Ok(None);
    }
    let name = cursor.script.slice(start, end);
    cursor.pos = end;
    if cursor.peek() != Some(b'(') {
        return if live { tcl.get(name.text(), at).map(Some) } else { Ok(Some(Value::new("", at))) };
    }
    cursor.pos += 1;
    let index = tcl.deeper(at, |tcl| substitute(tcl, host, cursor, live, &|bytes, i| bytes[i] == b')'))?;
    if cursor.peek() != Some(b')') {
        return Err(tcl.wrong(
            at,
            "a parenthesis that is not closed",
            "close the index of the array with `)`",
        ));
    }
    cursor.pos += 1;
    if !live {
        return Ok(Some(Value::new("", at)));
    }
    tcl.get(&format!("{}({})", name.text(), index.text()), at).map(Some)
}

/// The error for a command with a wrong number of words.
pub(super) fn wants(tcl: &Interpreter, words: &[Word], form: &str) -> Stop {
    let at = words.first().map_or_else(Spot::default, |w| w.at);
    let n = words.len().saturating_sub(1);
    let name = words.first().map_or("", Word::text);
    let found = match n {
        0 => format!("`{}` without words behind it", short(name)),
        1 => format!("`{}` with one word behind it", short(name)),
        n => format!("`{}` with {n} words behind it", short(name)),
    };
    tcl.wrong(at, found, format!("want `{form}`"))
}

/// Joins words with blanks, keeping the places of their pieces.
pub(super) fn joined(words: &[Word]) -> Value {
    if let [one] = words {
        return one.value.clone();
    }
    let mut text = String::new();
    let mut pieces = Vec::new();
    for word in words {
        if !text.is_empty() {
            text.push(' ');
        }
        match &word.value.origin {
            Origin::Exact => pieces.push((text.len(), word.value.spot(), true)),
            Origin::Made => pieces.push((text.len(), word.value.spot(), false)),
            Origin::Pieces(inner) => pieces.extend(inner.iter().map(|p| (p.0 + text.len(), p.1, p.2))),
        }
        text.push_str(word.text());
    }
    let spot = words.first().map_or_else(Spot::default, |w| w.at);
    Value { text: text.into(), spot, origin: Origin::Pieces(pieces.into()) }
}

/// A list of values, each of which keeps its place where its text needs no quoting.
pub(super) fn listed<'a>(values: impl IntoIterator<Item = &'a Value>, at: Spot) -> Value {
    let mut text = String::new();
    let mut pieces = Vec::new();
    for value in values {
        if !text.is_empty() {
            text.push(' ');
        }
        let quoted = list::quoted(value.text());
        let inside = if quoted.len() == value.text().len() {
            0
        } else if quoted.len() == value.text().len() + 2 && quoted.starts_with('{') {
            1
        } else {
            usize::MAX
        };
        match &value.origin {
            Origin::Exact if inside != usize::MAX => pieces.push((text.len() + inside, value.spot(), true)),
            Origin::Pieces(inner) if inside != usize::MAX => {
                pieces.extend(inner.iter().map(|p| (p.0 + text.len() + inside, p.1, p.2)));
            }
            _ => pieces.push((text.len(), value.spot(), false)),
        }
        text.push_str(&quoted);
    }
    Value { text: text.into(), spot: at, origin: Origin::Pieces(pieces.into()) }
}
