//! Control flow and procedures.

use super::list;
use super::number::{Number, number};
use super::value::{Spot, Value, Word};
use super::variables::Frame;
use super::words::wants;
use super::{Host, Interpreter, Outcome, Procedure, Stop, expr};

fn nothing(words: &[Word]) -> Value {
    Value::new("", words.first().map_or_else(Spot::default, |w| w.at))
}

pub(super) fn if_(tcl: &mut Interpreter, host: &mut dyn Host, words: &[Word]) -> Outcome {
    const FORM: &str = "if condition ?then? body ?elseif condition body? … ?else body?";
    let mut i = 1;
    loop {
        let Some(condition) = words.get(i) else { return Err(wants(tcl, words, FORM)) };
        let holds = expr::condition(tcl, host, condition)?;
        i += 1;
        if words.get(i).is_some_and(|w| w.text() == "then") {
            i += 1;
        }
        let Some(body) = words.get(i) else { return Err(wants(tcl, words, FORM)) };
        if holds {
            return tcl.evaluate(host, &body.value);
        }
        i += 1;
        match words.get(i).map(Word::text) {
            None => return Ok(nothing(words)),
            Some("elseif") => i += 1,
            Some("else") => {
                let body = words.get(i + 1).ok_or_else(|| wants(tcl, words, FORM))?;
                if let Some(extra) = words.get(i + 2) {
                    return Err(tcl.wrong(
                        extra.at,
                        "text behind the last body of `if`",
                        "want nothing more",
                    ));
                }
                return tcl.evaluate(host, &body.value);
            }
            Some(_) => {
                let body = &words[i];
                if let Some(extra) = words.get(i + 1) {
                    let known = ["elseif", "else"];
                    let e = tcl.unknown(body.at, "word of if", body.text(), known);
                    return Err(if body.text().len() < 12 {
                        e
                    } else {
                        tcl.wrong(extra.at, "text behind the last body of `if`", format!("want `{FORM}`"))
                    });
                }
                return tcl.evaluate(host, &body.value);
            }
        }
    }
}

/// Runs the body of a loop; whether to go on.
fn turn(tcl: &mut Interpreter, host: &mut dyn Host, body: &Word) -> Result<bool, Stop> {
    tcl.spend(0, body.at)?;
    match tcl.evaluate(host, &body.value) {
        Ok(_) | Err(Stop::Continue(_)) => Ok(true),
        Err(Stop::Break(_)) => Ok(false),
        Err(other) => Err(other),
    }
}

pub(super) fn while_(tcl: &mut Interpreter, host: &mut dyn Host, words: &[Word]) -> Outcome {
    let [_, condition, body] = words else { return Err(wants(tcl, words, "while condition body")) };
    while expr::condition(tcl, host, condition)? && turn(tcl, host, body)? {}
    Ok(nothing(words))
}

pub(super) fn for_(tcl: &mut Interpreter, host: &mut dyn Host, words: &[Word]) -> Outcome {
    let [_, first, condition, next, body] = words else {
        return Err(wants(tcl, words, "for first condition next body"));
    };
    tcl.evaluate(host, &first.value)?;
    while expr::condition(tcl, host, condition)? && turn(tcl, host, body)? {
        tcl.evaluate(host, &next.value)?;
    }
    Ok(nothing(words))
}

pub(super) fn foreach(tcl: &mut Interpreter, host: &mut dyn Host, words: &[Word]) -> Outcome {
    if words.len() < 4 || !words.len().is_multiple_of(2) {
        return Err(wants(tcl, words, "foreach names list ?names list …? body"));
    }
    let mut lists = Vec::new();
    let mut turns = 0;
    for pair in words[1..words.len() - 1].chunks_exact(2) {
        let names = tcl.list(&pair[0].value)?;
        if names.is_empty() {
            return Err(tcl.wrong(pair[0].at, "no name for the element", "want at least one"));
        }
        let values = tcl.list(&pair[1].value)?;
        turns = turns.max(values.len().div_ceil(names.len()));
        lists.push((names, values));
    }
    let body = &words[words.len() - 1];
    for k in 0..turns {
        for (names, values) in &lists {
            for (i, name) in names.iter().enumerate() {
                let value = values.get(k * names.len() + i).cloned();
                let value = value.unwrap_or_else(|| Value::new("", name.spot()));
                tcl.set(name.text(), value, name.spot())?;
            }
        }
        if !turn(tcl, host, body)? {
            break;
        }
    }
    Ok(nothing(words))
}

pub(super) fn switch(tcl: &mut Interpreter, host: &mut dyn Host, words: &[Word]) -> Outcome {
    const FORM: &str = "switch ?-exact|-glob? ?--? text {pattern body …}";
    let mut glob = false;
    let mut i = 1;
    while let Some(word) = words.get(i).filter(|w| w.text().starts_with('-')) {
        match word.text() {
            "--" => {
                i += 1;
                break;
            }
            "-exact" => glob = false,
            "-glob" => glob = true,
            _ if words.len() <= i + 2 => break,
            other => return Err(tcl.unknown(word.at, "option of switch", other, ["-exact", "-glob", "--"])),
        }
        i += 1;
    }
    let Some(text) = words.get(i) else { return Err(wants(tcl, words, FORM)) };
    let arms: Vec<Value> = match &words[i + 1..] {
        [one] => tcl.list(&one.value)?,
        many => many.iter().map(|w| w.value.clone()).collect(),
    };
    if arms.is_empty() || !arms.len().is_multiple_of(2) {
        return Err(wants(tcl, words, FORM));
    }
    let last = arms.len() / 2 - 1;
    let mut taken = false;
    for (k, arm) in arms.chunks_exact(2).enumerate() {
        let pattern = arm[0].text();
        taken = taken
            || (k == last && pattern == "default")
            || (if glob { list::fits(pattern, text.text()) } else { pattern == text.text() });
        if taken && arm[1].text() != "-" {
            return tcl.evaluate(host, &arm[1]);
        }
    }
    Ok(nothing(words))
}

pub(super) fn proc(tcl: &mut Interpreter, words: &[Word]) -> Outcome {
    let [_, name, params, body] = words else { return Err(wants(tcl, words, "proc name parameters body")) };
    let mut list = Vec::new();
    for param in tcl.list(&params.value)? {
        let parts = tcl.list(&param)?;
        match parts.as_slice() {
            [name] => list.push((name.text().to_owned(), None)),
            [name, value] => list.push((name.text().to_owned(), Some(value.clone()))),
            _ => {
                let found = format!("`{}` is no parameter", super::short(param.text()));
                return Err(tcl.wrong(param.spot(), found, "want `name` or `{name default}`"));
            }
        }
    }
    let name = name.text().trim_start_matches("::").to_owned();
    tcl.procedures.insert(name, Procedure { params: list.into(), body: body.value.clone() });
    Ok(nothing(words))
}

/// Calls a procedure.
pub(super) fn call(
    tcl: &mut Interpreter,
    host: &mut dyn Host,
    procedure: &Procedure,
    words: &[Word],
) -> Outcome {
    let given = &words[1..];
    let rest = procedure.params.last().is_some_and(|p| p.0 == "args");
    let named = procedure.params.len() - usize::from(rest);
    let mut values = Vec::new();
    for (i, (name, default)) in procedure.params[..named].iter().enumerate() {
        let value = given.get(i).map(|w| w.value.clone()).or_else(|| default.clone());
        let Some(value) = value else {
            let found = format!("`{}` without its parameter `{name}`", words[0].text());
            return Err(tcl.wrong(words[0].at, found, "want it behind the name"));
        };
        values.push((name.clone(), value));
    }
    if rest {
        let more: Vec<Value> = given.iter().skip(named).map(|w| w.value.clone()).collect();
        values.push(("args".to_owned(), super::words::listed(&more, words[0].at)));
    } else if let Some(extra) = given.get(named) {
        let found = format!("`{}` takes {named} words", words[0].text());
        return Err(tcl.wrong(extra.at, found, "want nothing more"));
    }
    tcl.frames.push(Frame::default());
    let outcome = (|| {
        for (name, value) in values {
            tcl.set(&name, value, words[0].at)?;
        }
        tcl.evaluate(host, &procedure.body)
    })();
    tcl.frames.pop();
    match outcome {
        Err(Stop::Return(value)) => Ok(value),
        Err(stop @ (Stop::Break(_) | Stop::Continue(_))) => match tcl.finished(Err(stop)) {
            Ok(value) => Ok(value),
            Err(e) => Err(e.into()),
        },
        other => other,
    }
}

pub(super) fn return_(tcl: &mut Interpreter, words: &[Word]) -> Outcome {
    match words {
        [_] => Err(Stop::Return(nothing(words))),
        [_, value] => Err(Stop::Return(value.value.clone())),
        [_, code, kind, rest @ ..] if code.text() == "-code" && rest.len() < 2 => {
            let value = rest.first().map_or_else(|| nothing(words), |w| w.value.clone());
            match kind.text() {
                "ok" | "return" | "0" | "2" => Err(Stop::Return(value)),
                "error" | "1" => Err(tcl.wrong(words[0].at, value.text(), "the script itself says so")),
                other => Err(tcl.unknown(kind.at, "code of return", other, ["ok", "error", "return"])),
            }
        }
        _ => Err(wants(tcl, words, "return ?value?")),
    }
}

pub(super) fn catch(tcl: &mut Interpreter, host: &mut dyn Host, words: &[Word]) -> Outcome {
    let (body, name) = match words {
        [_, body] => (body, None),
        [_, body, name] | [_, body, name, _] => (body, Some(name)),
        _ => return Err(wants(tcl, words, "catch script ?name?")),
    };
    let (frames, depth) = (tcl.frames.len(), tcl.depth);
    let (code, value) = match tcl.evaluate(host, &body.value) {
        Ok(value) => (0, value),
        Err(Stop::Error(e)) => {
            tcl.note("error-caught", words[0].at, &format!("an error is caught by the script: {e}"));
            (1, Value::new(e.to_string(), body.at))
        }
        Err(Stop::Return(value)) => (2, value),
        Err(Stop::Break(at)) => (3, Value::new("", at)),
        Err(Stop::Continue(at)) => (4, Value::new("", at)),
        Err(limit @ Stop::Limit(_)) => return Err(limit),
    };
    tcl.frames.truncate(frames);
    tcl.depth = depth;
    if let Some(name) = name {
        tcl.set(name.text(), value, name.at)?;
    }
    Ok(Value::new(code.to_string(), words[0].at))
}

/// A position in a list or string: a number, `end`, `end-1`, `2+1`.
pub(super) fn position(tcl: &Interpreter, word: &Word, length: usize) -> Result<i64, Stop> {
    let length = i64::try_from(length).unwrap_or(i64::MAX);
    let text = word.text().trim();
    let (base, rest) = match text.strip_prefix("end") {
        Some(rest) => (length - 1, rest),
        None => match number(text) {
            Some(Number::Whole(n)) => return Ok(n),
            _ => (0, text),
        },
    };
    if rest.is_empty() && !text.is_empty() {
        return Ok(base);
    }
    let split = rest.rfind(['+', '-']).filter(|_| text.starts_with("end") || rest.len() > 1);
    let value = split.and_then(|i| {
        let head = if i == 0 { Some(0) } else { rest[..i].parse::<i64>().ok() };
        let by = rest[i + 1..].parse::<i64>().ok()?;
        let by = if rest.as_bytes()[i] == b'-' { by.checked_neg()? } else { by };
        base.checked_add(head?)?.checked_add(by)
    });
    value.ok_or_else(|| {
        let found = format!("`{}` is no position", super::short(text));
        tcl.wrong(word.at, found, "want a number, `end` or `end-1`")
    })
}
