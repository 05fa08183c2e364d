//! The commands of the language.

use super::control::{self, position};
use super::expr;
use super::list;
use super::strings;
use super::value::{Value, Word};
use super::variables;
use super::words::{listed, wants};
use super::{Host, Interpreter, Outcome, short};

/// The commands that are offered.
pub(super) const NAMES: [&str; 38] = [
    "append", "array", "break", "catch", "concat", "continue", "error", "eval", "expr", "file", "for",
    "foreach", "format", "global", "if", "incr", "info", "join", "lappend", "lindex", "linsert", "list",
    "llength", "lrange", "lreverse", "lsearch", "lsort", "package", "proc", "puts", "return", "set",
    "source", "split", "string", "switch", "unset", "while",
];

/// Commands of the language that are not.
pub(super) const REFUSED: [&str; 36] = [
    "after",
    "apply",
    "binary",
    "cd",
    "chan",
    "clock",
    "close",
    "coroutine",
    "dict",
    "encoding",
    "eof",
    "exec",
    "exit",
    "fileevent",
    "flush",
    "gets",
    "glob",
    "interp",
    "load",
    "lmap",
    "lset",
    "namespace",
    "open",
    "pid",
    "pwd",
    "read",
    "regexp",
    "regsub",
    "rename",
    "scan",
    "socket",
    "subst",
    "trace",
    "uplevel",
    "upvar",
    "variable",
];

/// Runs a command of the language; nothing when there is none of that name.
pub(super) fn call(
    tcl: &mut Interpreter,
    host: &mut dyn Host,
    name: &str,
    words: &[Word],
) -> Option<Outcome> {
    Some(match name {
        "set" => variables::set(tcl, words),
        "unset" => variables::unset(tcl, words),
        "global" => Ok(variables::global(tcl, words)),
        "incr" => variables::incr(tcl, words),
        "append" => variables::append(tcl, words),
        "lappend" => variables::lappend(tcl, words),
        "array" => variables::array(tcl, words),
        "if" => control::if_(tcl, host, words),
        "while" => control::while_(tcl, host, words),
        "for" => control::for_(tcl, host, words),
        "foreach" => control::foreach(tcl, host, words),
        "switch" => control::switch(tcl, host, words),
        "proc" => control::proc(tcl, words),
        "return" => control::return_(tcl, words),
        "break" => Err(super::Stop::Break(words[0].at)),
        "continue" => Err(super::Stop::Continue(words[0].at)),
        "catch" => control::catch(tcl, host, words),
        "error" => error(tcl, words),
        "eval" => eval(tcl, host, words),
        "expr" => expr::command(tcl, host, words),
        "source" => source(tcl, host, words),
        "info" => info(tcl, host, words),
        "puts" => puts(tcl, words),
        "package" => {
            tcl.note("tcl-package", words[0].at, "`package` is taken as done");
            Ok(Value::new("", words[0].at))
        }
        "file" => file(tcl, words),
        "list" => Ok(listed(words[1..].iter().map(|w| &w.value), words[0].at)),
        "concat" => concat(tcl, words),
        "llength" | "lindex" | "lrange" | "lsearch" | "lsort" | "lreverse" | "linsert" => {
            lists(tcl, name, words)
        }
        "join" | "split" | "string" | "format" => strings::call(tcl, name, words),
        _ => return None,
    })
}

fn error(tcl: &mut Interpreter, words: &[Word]) -> Outcome {
    let [_, text, ..] = words else { return Err(wants(tcl, words, "error message")) };
    Err(tcl.wrong(words[0].at, short(text.text()), "the script itself says so"))
}

fn eval(tcl: &mut Interpreter, host: &mut dyn Host, words: &[Word]) -> Outcome {
    if words.len() < 2 {
        return Err(wants(tcl, words, "eval script"));
    }
    let script = super::words::joined(&words[1..]);
    tcl.spend(script.text().len(), words[0].at)?;
    tcl.evaluate(host, &script)
}

fn source(tcl: &mut Interpreter, host: &mut dyn Host, words: &[Word]) -> Outcome {
    match words {
        [_, name] => tcl.run_file(host, name),
        [_, flag, _, name] if flag.text() == "-encoding" => tcl.run_file(host, name),
        [_, flag, name] if matches!(flag.text(), "-e" | "-v" | "-echo" | "-verbose") => {
            tcl.run_file(host, name)
        }
        _ => Err(wants(tcl, words, "source file")),
    }
}

fn info(tcl: &mut Interpreter, host: &mut dyn Host, words: &[Word]) -> Outcome {
    let Some(what) = words.get(1) else { return Err(wants(tcl, words, "info exists name")) };
    let at = words[0].at;
    match (what.text(), &words[2..]) {
        ("exists", [name]) => Ok(Value::new(if tcl.exists(name.text()) { "1" } else { "0" }, at)),
        ("commands" | "procs", rest) if rest.len() < 2 => {
            let pattern = rest.first().map_or("*", Word::text).trim_start_matches("::").to_owned();
            let mut all: Vec<&str> = tcl.procedures.keys().map(String::as_str).collect();
            if what.text() == "commands" {
                all.extend(NAMES);
                all.extend(host.names());
            }
            all.retain(|n| list::fits(&pattern, n));
            all.sort_unstable();
            all.dedup();
            Ok(Value::new(list::join(all), at))
        }
        ("script", []) => {
            let path = tcl.files.source(at).map_or_else(String::new, |s| s.path.to_string());
            Ok(Value::new(path, at))
        }
        ("tclversion" | "patchlevel", []) => Ok(Value::new("8.6", at)),
        ("exists", _) => Err(wants(tcl, words, "info exists name")),
        (other, _) => {
            let known = ["exists", "commands", "procs", "script", "tclversion"];
            Err(tcl.unknown(what.at, "subcommand of info", other, known))
        }
    }
}

fn puts(tcl: &mut Interpreter, words: &[Word]) -> Outcome {
    let text = match words {
        [_, text] => text,
        [_, flag, text] if matches!(flag.text(), "-nonewline" | "stdout" | "stderr") => text,
        [_, flag, _, text] if flag.text() == "-nonewline" => text,
        _ => return Err(wants(tcl, words, "puts text")),
    };
    let said: String = text.text().chars().take(500).collect();
    tcl.note("script-says", words[0].at, &said);
    Ok(Value::new("", words[0].at))
}

fn file(tcl: &mut Interpreter, words: &[Word]) -> Outcome {
    let (Some(what), Some(path)) = (words.get(1), words.get(2)) else {
        return Err(wants(tcl, words, "file dirname|exists|extension|join|normalize|rootname|tail path"));
    };
    let p = std::path::Path::new(path.text());
    let text = |s: Option<&std::ffi::OsStr>| s.map_or_else(String::new, |s| s.to_string_lossy().into_owned());
    let made = match what.text() {
        "exists" => {
            let there = tcl.resolve(path).exists();
            if there { "1".into() } else { "0".to_owned() }
        }
        "dirname" => match p.parent().map(|p| p.to_string_lossy().into_owned()) {
            Some(parent) if parent.is_empty() => ".".into(),
            Some(parent) => parent,
            None => path.text().to_owned(),
        },
        "tail" => text(p.file_name()),
        "rootname" => p.with_extension("").to_string_lossy().into_owned(),
        "extension" => p.extension().map_or_else(String::new, |e| format!(".{}", e.to_string_lossy())),
        "normalize" => path.text().to_owned(),
        "join" => {
            let mut joined = std::path::PathBuf::new();
            for word in &words[2..] {
                joined.push(word.text());
            }
            joined.to_string_lossy().into_owned()
        }
        other => {
            let known = ["dirname", "exists", "extension", "join", "normalize", "rootname", "tail"];
            return Err(tcl.unknown(what.at, "subcommand of file", other, known));
        }
    };
    tcl.spend(made.len(), words[0].at)?;
    Ok(Value::new(made, words[0].at))
}

fn concat(tcl: &mut Interpreter, words: &[Word]) -> Outcome {
    let mut all = Vec::new();
    for word in &words[1..] {
        all.extend(tcl.list(&word.value)?);
    }
    Ok(listed(&all, words[0].at))
}

fn lists(tcl: &mut Interpreter, name: &str, words: &[Word]) -> Outcome {
    let at = words[0].at;
    match (name, &words[1..]) {
        ("llength", [of]) => Ok(Value::new(tcl.list(&of.value)?.len().to_string(), at)),
        ("lindex", [of, places @ ..]) => {
            let mut value = of.value.clone();
            for place in places {
                let mut all = tcl.list(&value)?;
                let i = usize::try_from(position(tcl, place, all.len())?).ok().filter(|i| *i < all.len());
                value = i.map_or_else(|| Value::new("", at), |i| all.swap_remove(i));
            }
            Ok(value)
        }
        ("lrange", [of, from, to]) => {
            let all = tcl.list(&of.value)?;
            let (from, to) = span(tcl, from, to, all.len())?;
            Ok(listed(&all[from..to], at))
        }
        ("lreverse", [of]) => {
            let mut all = tcl.list(&of.value)?;
            all.reverse();
            Ok(listed(&all, at))
        }
        ("linsert", [of, place, new @ ..]) => {
            let mut all = tcl.list(&of.value)?;
            let length = all.len() + 1;
            let i = usize::try_from(position(tcl, place, length)?).unwrap_or(0).min(all.len());
            all.splice(i..i, new.iter().map(|w| w.value.clone()));
            Ok(listed(&all, at))
        }
        ("lsort", [options @ .., of]) => {
            let mut all = tcl.list(&of.value)?;
            let has = |o: &str| options.iter().any(|w| w.text() == o);
            let known = [
                "-ascii",
                "-decreasing",
                "-dictionary",
                "-increasing",
                "-integer",
                "-nocase",
                "-real",
                "-unique",
            ];
            if let Some(bad) = options.iter().find(|w| !known.contains(&w.text())) {
                return Err(tcl.unknown(bad.at, "option of lsort", bad.text(), known));
            }
            if has("-integer") || has("-real") {
                for value in &all {
                    if super::number::number(value.text()).is_none() {
                        let found = format!("`{}` is no number", short(value.text()));
                        return Err(tcl.wrong(value.spot(), found, "want numbers to sort"));
                    }
                }
                let key =
                    |v: &Value| super::number::number(v.text()).map_or(0.0, super::number::Number::real);
                all.sort_by(|a, b| key(a).total_cmp(&key(b)));
            } else if has("-nocase") {
                all.sort_by_key(|v| v.text().to_lowercase());
            } else {
                all.sort_by(|a, b| a.text().cmp(b.text()));
            }
            if has("-decreasing") {
                all.reverse();
            }
            if has("-unique") {
                all.dedup_by(|a, b| a.text() == b.text());
            }
            Ok(listed(&all, at))
        }
        ("lsearch", [options @ .., of, pattern]) => {
            let all = tcl.list(&of.value)?;
            let known = ["-all", "-exact", "-glob", "-inline", "-not"];
            if let Some(bad) = options.iter().find(|w| !known.contains(&w.text())) {
                return Err(tcl.unknown(bad.at, "option of lsearch", bad.text(), known));
            }
            let has = |o: &str| options.iter().any(|w| w.text() == o);
            let hit = |v: &Value| {
                let equal = if has("-exact") {
                    v.text() == pattern.text()
                } else {
                    list::fits(pattern.text(), v.text())
                };
                equal != has("-not")
            };
            let found: Vec<usize> = (0..all.len()).filter(|i| hit(&all[*i])).collect();
            Ok(match (has("-all"), has("-inline")) {
                (true, true) => listed(found.iter().map(|i| &all[*i]), at),
                (true, false) => {
                    let texts: Vec<String> = found.iter().map(ToString::to_string).collect();
                    Value::new(texts.join(" "), at)
                }
                (false, true) => found.first().map_or_else(|| Value::new("", at), |i| all[*i].clone()),
                (false, false) => Value::new(found.first().map_or("-1".to_owned(), ToString::to_string), at),
            })
        }
        _ => Err(wants(
            tcl,
            words,
            match name {
                "llength" => "llength list",
                "lindex" => "lindex list ?position …?",
                "lrange" => "lrange list first last",
                "lreverse" => "lreverse list",
                "linsert" => "linsert list position element …",
                "lsort" => "lsort ?options? list",
                _ => "lsearch ?options? list pattern",
            },
        )),
    }
}

/// The half-open range that two positions name.
pub(super) fn span(
    tcl: &Interpreter,
    from: &Word,
    to: &Word,
    length: usize,
) -> Result<(usize, usize), super::Stop> {
    let from = usize::try_from(position(tcl, from, length)?.max(0)).unwrap_or(length).min(length);
    let to = position(tcl, to, length)?.saturating_add(1).max(0);
    let to = usize::try_from(to).unwrap_or(length).min(length);
    Ok((from, to.max(from)))
}
