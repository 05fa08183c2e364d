//! Commands on text.

use super::builtin::span;
use super::control::position;
use super::list;
use super::number::{Number, number, truth};
use super::value::{Value, Word};
use super::words::{listed, wants};
use super::{Interpreter, Outcome, short};

/// Widest field of `format`.
const MAX_WIDTH: usize = 1000;

pub(super) fn call(tcl: &mut Interpreter, name: &str, words: &[Word]) -> Outcome {
    let at = words[0].at;
    match (name, &words[1..]) {
        ("join", [of, rest @ ..]) if rest.len() < 2 => {
            let all = tcl.list(&of.value)?;
            let between = rest.first().map_or(" ", Word::text);
            let texts: Vec<&str> = all.iter().map(Value::text).collect();
            let made = texts.join(between);
            tcl.spend(made.len(), at)?;
            Ok(Value::new(made, at))
        }
        ("join", _) => Err(wants(tcl, words, "join list ?between?")),
        ("split", [text, rest @ ..]) if rest.len() < 2 => {
            let at_chars = rest.first().map_or(" \t\r\n", Word::text);
            tcl.spend(text.text().len() * 2, at)?;
            let value = &text.value;
            let mut parts = Vec::new();
            if at_chars.is_empty() {
                parts.extend(value.text().char_indices().map(|(i, c)| value.slice(i, i + c.len_utf8())));
            } else {
                let mut start = 0;
                for (i, c) in value.text().char_indices().filter(|(_, c)| at_chars.contains(*c)) {
                    parts.push(value.slice(start, i));
                    start = i + c.len_utf8();
                }
                if !value.text().is_empty() {
                    parts.push(value.slice(start, value.text().len()));
                }
            }
            Ok(listed(&parts, at))
        }
        ("split", _) => Err(wants(tcl, words, "split text ?characters?")),
        ("format", [form, values @ ..]) => {
            let made = format(tcl, form, values)?;
            tcl.spend(made.len(), at)?;
            Ok(Value::new(made, at))
        }
        ("format", _) => Err(wants(tcl, words, "format form ?value …?")),
        _ => string(tcl, words),
    }
}

fn string(tcl: &mut Interpreter, words: &[Word]) -> Outcome {
    const KNOWN: [&str; 16] = [
        "compare", "equal", "first", "index", "is", "last", "length", "map", "match", "range", "repeat",
        "replace", "tolower", "toupper", "trim", "trimleft",
    ];
    let Some(what) = words.get(1) else { return Err(wants(tcl, words, "string subcommand text …")) };
    let at = words[0].at;
    let nocase = words.get(2).is_some_and(|w| w.text() == "-nocase");
    let rest = &words[if nocase { 3 } else { 2 }..];
    for word in rest {
        tcl.spend(word.text().len(), at)?;
    }
    let fold = |w: &Word| if nocase { w.text().to_lowercase() } else { w.text().to_owned() };
    let flag = |b: bool| Ok(Value::new(if b { "1" } else { "0" }, at));
    let trimmed = |w: &Word, chars: &[Word], left: bool, right: bool| {
        let set: Vec<char> =
            chars.first().map_or_else(|| " \t\r\n".chars().collect(), |w| w.text().chars().collect());
        let mut text = w.text();
        if left {
            text = text.trim_start_matches(&set[..]);
        }
        if right {
            text = text.trim_end_matches(&set[..]);
        }
        let start = text.as_ptr() as usize - w.text().as_ptr() as usize;
        Ok(w.value.slice(start, start + text.len()))
    };
    match (what.text(), rest) {
        ("equal", [a, b]) => flag(fold(a) == fold(b)),
        ("compare", [a, b]) => {
            let order = fold(a).cmp(&fold(b)) as i8;
            Ok(Value::new(order.to_string(), at))
        }
        ("match", [pattern, text]) => flag(list::fits(&fold(pattern), &fold(text))),
        ("length", [text]) => Ok(Value::new(text.text().chars().count().to_string(), at)),
        ("toupper", [text]) => Ok(Value::new(text.text().to_uppercase(), at)),
        ("tolower", [text]) => Ok(Value::new(text.text().to_lowercase(), at)),
        ("trim", [text, chars @ ..]) if chars.len() < 2 => trimmed(text, chars, true, true),
        ("trimleft", [text, chars @ ..]) if chars.len() < 2 => trimmed(text, chars, true, false),
        ("trimright", [text, chars @ ..]) if chars.len() < 2 => trimmed(text, chars, false, true),
        ("index", [text, place]) => {
            let chars: Vec<char> = text.text().chars().collect();
            let i = usize::try_from(position(tcl, place, chars.len())?).ok();
            let c = i.and_then(|i| chars.get(i));
            Ok(Value::new(c.map_or_else(String::new, ToString::to_string), at))
        }
        ("range", [text, from, to]) => {
            let chars: Vec<char> = text.text().chars().collect();
            let (from, to) = span(tcl, from, to, chars.len())?;
            Ok(Value::new(chars[from..to].iter().collect::<String>(), at))
        }
        ("first" | "last", [needle, text]) => {
            let found = if what.text() == "first" {
                text.text().find(needle.text())
            } else {
                text.text().rfind(needle.text())
            };
            let found = found.filter(|_| !needle.text().is_empty());
            let place = found.map(|i| text.text()[..i].chars().count().to_string());
            Ok(Value::new(place.unwrap_or_else(|| "-1".into()), at))
        }
        ("repeat", [text, times]) => {
            let times = usize::try_from(tcl.whole(times)?).unwrap_or(0);
            tcl.spend(text.text().len().saturating_mul(times), at)?;
            Ok(Value::new(text.text().repeat(times), at))
        }
        ("map", [map, text]) => {
            let pairs = tcl.list(&map.value)?;
            let mut out = String::new();
            let mut left = text.text();
            while let Some(c) = left.chars().next() {
                let hit =
                    pairs.chunks_exact(2).find(|p| !p[0].text().is_empty() && left.starts_with(p[0].text()));
                let used = if let Some(p) = hit {
                    out.push_str(p[1].text());
                    p[0].text().len()
                } else {
                    out.push(c);
                    c.len_utf8()
                };
                tcl.spend(hit.map_or(0, |p| p[1].text().len()), at)?;
                left = &left[used..];
            }
            Ok(Value::new(out, at))
        }
        ("is", [class, text]) => {
            let t = text.text();
            let all = |f: fn(char) -> bool| t.chars().all(f);
            flag(match class.text() {
                "integer" | "wideinteger" => matches!(number(t), Some(Number::Whole(_))),
                "double" => number(t).is_some(),
                "boolean" => truth(t).is_some(),
                "true" => truth(t) == Some(true),
                "false" => truth(t) == Some(false),
                "alpha" => all(char::is_alphabetic),
                "alnum" => all(char::is_alphanumeric),
                "digit" => all(|c| c.is_ascii_digit()),
                "space" => all(char::is_whitespace),
                "upper" => all(char::is_uppercase),
                "lower" => all(char::is_lowercase),
                other => {
                    let known = ["integer", "double", "boolean", "alpha", "alnum", "digit", "space"];
                    return Err(tcl.unknown(class.at, "class of text", other, known));
                }
            })
        }
        (name, _) if KNOWN.contains(&name) || name == "trimright" => {
            Err(wants(tcl, words, &format!("string {name} …, with its words")))
        }
        (other, _) => Err(tcl.unknown(what.at, "subcommand of string", other, KNOWN)),
    }
}

fn format(tcl: &Interpreter, form: &Word, values: &[Word]) -> Result<String, super::Stop> {
    let wrong = |found: &str| tcl.wrong(form.at, found, "want %s, %d, %x, %f, %e or %g with a value each");
    let mut out = String::new();
    let mut values = values.iter();
    let mut chars = form.text().chars().peekable();
    while let Some(c) = chars.next() {
        if c != '%' {
            out.push(c);
            continue;
        }
        let (mut left, mut zero, mut plus) = (false, false, false);
        while let Some(f) = chars.next_if(|c| matches!(c, '-' | '0' | '+' | ' ' | '#')) {
            left |= f == '-';
            zero |= f == '0';
            plus |= f == '+';
        }
        let mut count = || {
            let mut n: Option<usize> = None;
            while let Some(d) = chars.next_if(char::is_ascii_digit) {
                let digit = d.to_digit(10).map_or(0, |d| d as usize);
                n = Some(n.unwrap_or(0).saturating_mul(10).saturating_add(digit));
            }
            (n, chars.next_if_eq(&'.').is_some())
        };
        let (width, dot) = count();
        let precision = if dot { count().0.or(Some(0)) } else { None };
        let width = width.unwrap_or(0);
        if width > MAX_WIDTH || precision.is_some_and(|p| p > MAX_WIDTH) {
            return Err(wrong("a field wider than 1000"));
        }
        while chars.next_if(|c| matches!(c, 'l' | 'h')).is_some() {}
        let kind = chars.next().ok_or_else(|| wrong("a form that ends with `%`"))?;
        if kind == '%' {
            out.push('%');
            continue;
        }
        let value = values.next().ok_or_else(|| wrong("fewer values than fields"))?;
        let real = || {
            number(value.text()).map(Number::real).ok_or_else(|| {
                tcl.wrong(value.at, format!("`{}` is no number", short(value.text())), "want a number")
            })
        };
        let mut text = match kind {
            's' => match precision {
                Some(p) => value.text().chars().take(p).collect(),
                None => value.text().to_owned(),
            },
            'd' | 'i' | 'u' => tcl.whole(value)?.to_string(),
            'x' => format!("{:x}", tcl.whole(value)?),
            'X' => format!("{:X}", tcl.whole(value)?),
            'o' => format!("{:o}", tcl.whole(value)?),
            'b' => format!("{:b}", tcl.whole(value)?),
            'c' => {
                let code = u32::try_from(tcl.whole(value)?).ok().and_then(char::from_u32);
                code.ok_or_else(|| wrong("a number that is no character"))?.to_string()
            }
            'f' => format!("{:.*}", precision.unwrap_or(6), real()?),
            'e' => format!("{:.*e}", precision.unwrap_or(6), real()?),
            'g' => super::number::real_text(real()?).trim_end_matches(".0").to_owned(),
            other => return Err(wrong(&format!("the field `%{other}`"))),
        };
        if plus && kind != 's' && !text.starts_with('-') {
            text.insert(0, '+');
        }
        let pad = width.saturating_sub(text.chars().count());
        if left {
            out.push_str(&text);
            out.extend(std::iter::repeat_n(' ', pad));
        } else if zero && kind != 's' {
            let sign = text.len() - text.trim_start_matches(['-', '+']).len();
            out.push_str(&text[..sign]);
            out.extend(std::iter::repeat_n('0', pad));
            out.push_str(&text[sign..]);
        } else {
            out.extend(std::iter::repeat_n(' ', pad));
            out.push_str(&text);
        }
    }
    Ok(out)
}
