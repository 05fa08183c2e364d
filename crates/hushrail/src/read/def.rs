//! Instance counts from the component section of a layout: LEF/DEF 5.8, DEF part.
//!
//! A layout lists every placed cell once, flat, fill and taps among them. The section is read in full and its
//! announced number held against what it holds; of the other sections only the statements are followed to their
//! ends. Names of components are not kept, so two components of one name are not found out.
//!
//! # Example
//! ```
//! use hushrail::read::{Input, def::count_def};
//! let text = "VERSION 5.8 ;\nDESIGN chip ;\nCOMPONENTS 2 ;\n- u1 inv_1 + PLACED ( 0 0 ) N ;\n- u2 inv_1 ;\n\
//!             END COMPONENTS\nEND DESIGN\n";
//! let counts = count_def(&mut Input::stream("chip.def", text.as_bytes()))?;
//! assert_eq!((counts.top.as_str(), counts.counts["inv_1"]), ("chip", 2));
//! # Ok::<(), hushrail::read::ReadError>(())
//! ```

use indexmap::IndexMap;
use rustc_hash::FxBuildHasher;

use super::counts::InstanceCounts;
use super::source::{Input, Place, ReadError, nearest};
use super::window::{PIECE, Window};

/// First words of statements, and of sections.
const STATEMENTS: [&str; 28] = [
    "VERSION",
    "NAMESCASESENSITIVE",
    "DIVIDERCHAR",
    "BUSBITCHARS",
    "DESIGN",
    "TECHNOLOGY",
    "UNITS",
    "HISTORY",
    "PROPERTYDEFINITIONS",
    "DIEAREA",
    "ROW",
    "TRACKS",
    "GCELLGRID",
    "VIAS",
    "STYLES",
    "NONDEFAULTRULES",
    "REGIONS",
    "COMPONENTMASKSHIFT",
    "COMPONENTS",
    "PINS",
    "PINPROPERTIES",
    "BLOCKAGES",
    "SLOTS",
    "FILLS",
    "SPECIALNETS",
    "NETS",
    "SCANCHAINS",
    "GROUPS",
];

/// Counts the components of a DEF file by their model.
///
/// # Errors
/// The input cannot be read, ends early or is not DEF; there is no component section, or two; it holds another number
/// of components than it announces; a component lacks its name or model.
pub fn count_def(input: &mut Input) -> Result<InstanceCounts, ReadError> {
    count_in_pieces(input, PIECE)
}

fn count_in_pieces(input: &mut Input, piece: usize) -> Result<InstanceCounts, ReadError> {
    let mut def =
        Def { window: Window::open(input, piece)?, pos: 0, start: 0, word: (0, 0), statement: None };
    if def.window.text().starts_with('\u{feff}') {
        def.pos = '\u{feff}'.len_utf8();
    }
    def.file()
}

/// A walk through the words of a file.
struct Def {
    window: Window,
    pos: usize,
    /// Where in the file the word read last begins.
    start: usize,
    /// Where in the window it is.
    word: (usize, usize),
    /// Where in the file the statement begins.
    statement: Option<usize>,
}

impl Def {
    /// Reads the next word; false at the end of the file.
    fn next(&mut self) -> Result<bool, ReadError> {
        loop {
            let bytes = self.window.text().as_bytes();
            let mut i = self.pos;
            while bytes.get(i).is_some_and(u8::is_ascii_whitespace) {
                i += 1;
            }
            let rest = bytes.get(i..).unwrap_or_default();
            let end = match rest.first() {
                None => None,
                Some(b'#') => memchr::memchr(b'\n', rest),
                // a string ends at its second quote, and at nothing else
                Some(b'"') => memchr::memchr(b'"', &rest[1..]).map(|n| n + 2),
                Some(_) => rest.iter().position(u8::is_ascii_whitespace),
            };
            let Some(end) = end else {
                let needed: Vec<usize> = self.statement.into_iter().collect();
                if self.window.slide(i, &needed)? {
                    self.pos = 0;
                    continue;
                }
                return self.last_word(i);
            };
            self.pos = i + end;
            if rest[0] != b'#' {
                (self.start, self.word) = (self.window.base() + i, (i, i + end));
                return Ok(true);
            }
        }
    }

    /// What begins at `i` and has no end of its own but the file's.
    fn last_word(&mut self, i: usize) -> Result<bool, ReadError> {
        let length = self.window.text().len();
        (self.start, self.word) = (self.window.base() + i, (i, length));
        self.pos = length;
        match self.window.text().as_bytes().get(i) {
            None | Some(b'#') => Ok(false),
            Some(b'"') => Err(self.syntax("a string without its second quote", "close it with `\"`")),
            Some(_) => Ok(true),
        }
    }

    fn text(&self) -> &str {
        self.window.text().get(self.word.0..self.word.1).unwrap_or_default()
    }

    fn place(&self) -> Place {
        self.window.place(self.start)
    }

    fn syntax(&self, found: impl Into<String>, wanted: impl Into<String>) -> ReadError {
        ReadError::Syntax { at: self.place(), found: found.into(), wanted: wanted.into() }
    }

    /// The error for a file that ends inside the present statement.
    fn cut_off(&self, wanted: &str) -> ReadError {
        let at = self.window.place(self.statement.unwrap_or(self.start));
        let found = "the file ends inside what begins here".to_owned();
        ReadError::Syntax { at, found, wanted: format!("want {wanted} before the end; is the file cut off?") }
    }

    /// The next word of a statement.
    fn within(&mut self, wanted: &str) -> Result<(), ReadError> {
        if self.next()? { Ok(()) } else { Err(self.cut_off(wanted)) }
    }

    /// The next word of a statement, which must not end it.
    fn value(&mut self, wanted: &str) -> Result<(), ReadError> {
        self.within(wanted)?;
        match self.text() {
            ";" | "-" | "+" | "END" => {
                Err(self.syntax(format!("`{}` does not fit here", self.text()), format!("want {wanted}")))
            }
            _ => Ok(()),
        }
    }

    /// Runs to the end of the statement.
    fn skip(&mut self) -> Result<(), ReadError> {
        loop {
            self.within("` ;`")?;
            match self.text() {
                ";" => return Ok(()),
                "END" => {
                    return Err(self.syntax("`END` inside a statement", "end the statement with ` ;` first"));
                }
                _ => {}
            }
        }
    }

    fn file(&mut self) -> Result<InstanceCounts, ReadError> {
        let mut top = None;
        let mut counts = None;
        let mut in_properties = false;
        loop {
            self.statement = None;
            if !self.next()? {
                if top.is_none() && counts.is_none() {
                    return Err(self.window.nothing("DEF statement DESIGN"));
                }
                return Err(self.syntax("the file ends without `END DESIGN`", "is the file cut off?"));
            }
            self.statement = Some(self.start);
            match self.text() {
                "DESIGN" if !in_properties => {
                    self.value("the name of the design")?;
                    top = Some(self.text().to_owned());
                    self.skip()?;
                }
                "COMPONENTS" if counts.is_some() => {
                    return Err(self.syntax("a second section COMPONENTS", "want one"));
                }
                "COMPONENTS" => counts = Some(self.components()?),
                "END" => {
                    self.within("the name of a section")?;
                    if self.text() == "DESIGN" {
                        break;
                    }
                    in_properties = false;
                }
                "BEGINEXT" => {
                    while self.text() != "ENDEXT" {
                        self.within("`ENDEXT`")?;
                    }
                }
                "PROPERTYDEFINITIONS" => in_properties = true,
                word if word == "-" || is_property(word) || STATEMENTS.contains(&word) => {
                    if word == "HISTORY" {
                        while self.text() != ";" {
                            self.within("` ;`")?;
                        }
                    } else {
                        self.skip()?;
                    }
                }
                word => {
                    return Err(ReadError::Unknown {
                        at: self.place(),
                        kind: "DEF statement",
                        name: word.chars().take(40).collect(),
                        nearest: nearest(word, STATEMENTS),
                    });
                }
            }
        }
        self.statement = None;
        if self.next()? {
            return Err(self.syntax(format!("`{}` after `END DESIGN`", self.text()), "want nothing more"));
        }
        let counts = counts.ok_or_else(|| self.window.nothing("section COMPONENTS"))?;
        let top = top.unwrap_or_default();
        Ok(InstanceCounts { top, counts: counts.into_iter().collect() })
    }

    /// Reads the component section, whose first word has been read.
    fn components(&mut self) -> Result<IndexMap<String, u64, FxBuildHasher>, ReadError> {
        self.value("the number of components")?;
        let (at, text) = (self.place(), self.text().to_owned());
        let Ok(announced) = text.parse::<u64>() else {
            return Err(self.syntax(format!("`{text}` is no number of components"), "want a whole number"));
        };
        self.skip()?;
        let mut counts: IndexMap<String, u64, FxBuildHasher> = IndexMap::default();
        let mut total = 0u64;
        loop {
            self.within("`END COMPONENTS`")?;
            match self.text() {
                "-" => {
                    self.statement = Some(self.start);
                    self.value("the name of the component")?;
                    self.value("the model of the component")?;
                    let model = self.text();
                    if let Some(n) = counts.get_mut(model) {
                        *n += 1;
                    } else {
                        let model = model.to_owned();
                        counts.insert(model, 1);
                    }
                    total += 1;
                    self.skip()?;
                }
                "END" => {
                    self.within("`COMPONENTS`")?;
                    if self.text() != "COMPONENTS" {
                        return Err(self.syntax(
                            format!("`END {}` inside the section COMPONENTS", self.text()),
                            "want `END COMPONENTS`",
                        ));
                    }
                    break;
                }
                other => {
                    let found = format!("`{other}` does not fit here");
                    return Err(self.syntax(found, "want `- name model … ;` or `END COMPONENTS`"));
                }
            }
        }
        if total != announced {
            return Err(ReadError::Range {
                at,
                name: "number of components".into(),
                value: announced.to_string(),
                wanted: format!("the section holds {total}; is a part of it missing?"),
            });
        }
        Ok(counts)
    }
}

/// What a property definition begins with: the kind of thing that has the property.
fn is_property(word: &str) -> bool {
    matches!(
        word,
        "COMPONENT" | "COMPONENTPIN" | "NET" | "SPECIALNET" | "NONDEFAULTRULE" | "GROUP" | "REGION"
    )
}

#[cfg(test)]
mod tests {
    use proptest::prelude::*;

    use super::*;

    fn read(text: &str) -> Result<InstanceCounts, ReadError> {
        let whole = count_def(&mut Input::in_pieces("c.def", text));
        for piece in [4, 9] {
            let pieces = count_in_pieces(&mut Input::in_pieces("c.def", text), piece);
            assert_eq!(pieces, whole, "in pieces of {piece} bytes: {text}");
        }
        whole
    }

    fn message(text: &str) -> String {
        read(text).unwrap_err().to_string()
    }

    const GOOD: &str = r#"# a comment ;
VERSION 5.8 ;
DIVIDERCHAR "/" ;
BUSBITCHARS "[]" ;
DESIGN chip ;
UNITS DISTANCE MICRONS 1000 ;
HISTORY END of an old one ;
PROPERTYDEFINITIONS
  COMPONENT note STRING "a ; b" ;
  DESIGN count INTEGER 3 ;
END PROPERTYDEFINITIONS
DIEAREA ( 0 0 ) ( 100 100 ) ;
ROW r0 unit 0 0 N DO 10 BY 1 STEP 10 0 ;
COMPONENTS 4 ;
- u1 inv_1 + PLACED ( 0 0 ) N ; # - u9 inv_9 ;
- core/u\[1\] nand2_1
   + SOURCE DIST + PROPERTY note "; - u8 inv_8 ;"
   ;
- u3 inv_1 + FIXED ( 1 1 ) FS ;
- FILL_1 fill_1 ;
END COMPONENTS
PINS 1 ;
- a + NET a + DIRECTION INPUT ;
END PINS
NETS 1 ;
- n ( u1 A ) ( u3 Y ) + ROUTED met1 ( 0 0 ) ( 1 0 ) ;
END NETS
BEGINEXT "x" anything END ; ENDEXT
END DESIGN
"#;

    #[test]
    fn components_are_counted_by_model() {
        let c = read(GOOD).unwrap();
        assert_eq!((c.top.as_str(), c.total()), ("chip", 4));
        let rows: Vec<_> = c.counts.iter().map(|(k, &n)| (k.as_str(), n)).collect();
        assert_eq!(rows, [("inv_1", 2), ("nand2_1", 1), ("fill_1", 1)]);
    }

    #[test]
    fn bad_layouts_are_placed() {
        let components = |text: &str| format!("DESIGN c ;\nCOMPONENTS {text}\nEND DESIGN\n");
        for (text, wanted) in [
            ("", "c.def: no DEF statement DESIGN found (the file is empty)".to_owned()),
            ("# only\n", "c.def: no DEF statement DESIGN found".to_owned()),
            ("module m;", "c.def:1:1: DEF statement `module` is not defined".to_owned()),
            ("DESIGN c ;\nEND DESIGN", "c.def: no section COMPONENTS found".to_owned()),
            (
                "DESIGNS c ;",
                "c.def:1:1: DEF statement `DESIGNS` is not defined; did you mean `DESIGN`?".to_owned(),
            ),
            ("DESIGN ;", "c.def:1:8: `;` does not fit here; want the name of the design".to_owned()),
            ("DESIGN c", "c.def:1:1: the file ends inside what begins here; want ` ;`".to_owned()),
            ("DIVIDERCHAR \"/ ;\n", "c.def:1:13: a string without its second quote".to_owned()),
        ] {
            let got = message(text);
            assert!(got.starts_with(&wanted), "{text}\n got {got}\nwant {wanted}");
        }
        for (text, wanted) in [
            ("2 ;\n- u1 inv ;\nEND COMPONENTS", "2:12: `number of components` is 2; the section holds 1"),
            ("0 ;\n- u1 inv ;\nEND COMPONENTS", "2:12: `number of components` is 0; the section holds 1"),
            ("-3 ;\nEND COMPONENTS", "2:12: `-3` is no number of components"),
            (";\nEND COMPONENTS", "2:12: `;` does not fit here; want the number of components"),
            ("1 ;\n- u1 ;\nEND COMPONENTS", "3:6: `;` does not fit here; want the model"),
            ("1 ;\n- u1 inv\nEND COMPONENTS", "4:1: `END` inside a statement"),
            ("1 ;\n- u1 inv ;\nEND NETS", "4:5: `END NETS` inside the section COMPONENTS"),
            ("1 ;\nu1 inv ;\nEND COMPONENTS", "3:1: `u1` does not fit here; want `- name model … ;`"),
            ("1 ;\n- u1 inv ;", "4:5: `END DESIGN` inside the section COMPONENTS"),
            ("0 ;\nEND COMPONENTS\nCOMPONENTS 0 ;", "4:1: a second section COMPONENTS"),
        ] {
            let got = message(&components(text));
            assert!(got.starts_with(&format!("c.def:{wanted}")), "{text}\n got {got}\nwant {wanted}");
        }
        assert!(message(&(GOOD.to_owned() + "more")).contains("`more` after `END DESIGN`"));
    }

    #[test]
    fn every_cut_is_an_error() {
        let last = GOOD.rfind("DESIGN").unwrap() + "DESIGN".len();
        for cut in 0..last {
            assert!(read(&GOOD[..cut]).is_err(), "{}", &GOOD[..cut]);
        }
        assert!(read(&GOOD[..last]).is_ok());
    }

    proptest! {
        #[test]
        fn any_bytes_and_changes_give_a_value_or_an_error(
            bytes in proptest::collection::vec(any::<u8>(), 0..200),
            changes in proptest::collection::vec((0..GOOD.len(), 0usize..4, "[ -~\n]{0,4}"), 1..6)
        ) {
            let _ = read(&String::from_utf8_lossy(&bytes));
            let mut text = GOOD.to_owned();
            for (at, removed, added) in changes {
                let at = at.min(text.len());
                text.replace_range(at..(at + removed).min(text.len()), &added);
            }
            let _ = read(&text);
        }
    }
}
