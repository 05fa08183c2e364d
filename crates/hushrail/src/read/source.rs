//! Where text came from: files, places in them, and the error every reader returns.

use std::fmt;
use std::io::Read as _;
use std::path::{Path, PathBuf};
use std::sync::Arc;

/// A place in a file: line and column count from one; column counts characters.
#[derive(Debug, Clone, PartialEq, Eq, PartialOrd, Ord, Hash)]
pub struct Place {
    /// The file, as the user named it.
    pub path: Arc<str>,
    /// Line, from one.
    pub line: u32,
    /// Column, from one.
    pub column: u32,
}

impl Place {
    /// A place from its parts.
    pub fn new(path: &Arc<str>, line: usize, column: usize) -> Self {
        let clip = |n: usize| u32::try_from(n).unwrap_or(u32::MAX);
        Self { path: Arc::clone(path), line: clip(line), column: clip(column) }
    }

    /// The place of a byte offset in `text`.
    pub fn of_offset(path: &Arc<str>, text: &str, offset: usize) -> Self {
        let before = &text.as_bytes()[..offset.min(text.len())];
        let line = before.split(|&b| b == b'\n').count();
        let start = before.iter().rposition(|&b| b == b'\n').map_or(0, |i| i + 1);
        let column = String::from_utf8_lossy(&before[start..]).chars().count() + 1;
        Self::new(path, line, column)
    }
}

impl fmt::Display for Place {
    fn fmt(&self, f: &mut fmt::Formatter<'_>) -> fmt::Result {
        write!(f, "{}:{}:{}", self.path, self.line, self.column)
    }
}

/// What a reader found wrong, where, and what would be right.
#[derive(Debug, Clone, PartialEq, thiserror::Error)]
#[non_exhaustive]
pub enum ReadError {
    /// The file could not be opened or read.
    #[error("{path}: cannot be read: {reason}")]
    Io {
        /// The file.
        path: String,
        /// The operating system's words.
        reason: String,
        /// Whether the file does not exist.
        missing: bool,
    },
    /// The bytes are not UTF-8 text.
    #[error("{at}: byte 0x{byte:02x} is not UTF-8 text; save the file as UTF-8 or ASCII")]
    NotText {
        /// Where.
        at: Place,
        /// The first byte that is not text.
        byte: u8,
    },
    /// A compressed file ends early or is damaged.
    #[error("{path}: the gzip stream is damaged or cut off: {reason}; fetch the file again")]
    Gzip {
        /// The file.
        path: String,
        /// What the decompressor said.
        reason: String,
    },
    /// The text does not follow the format.
    #[error("{at}: {found}; {wanted}")]
    Syntax {
        /// Where.
        at: Place,
        /// What was found.
        found: String,
        /// What would be right.
        wanted: String,
    },
    /// A name nothing defines.
    #[error("{at}: {kind} `{name}` is not defined{}", hint(.nearest.as_ref()))]
    Unknown {
        /// Where it is used.
        at: Place,
        /// What sort of name: "parameter", "model", "module", "key"…
        kind: &'static str,
        /// The name.
        name: String,
        /// The nearest defined name, when one is near.
        nearest: Option<String>,
    },
    /// A value outside what is possible.
    #[error("{at}: `{name}` is {value}; {wanted}")]
    Range {
        /// Where.
        at: Place,
        /// The quantity.
        name: String,
        /// What was found, with unit.
        value: String,
        /// What would be right.
        wanted: String,
    },
    /// The file holds nothing of what was asked for.
    #[error("{path}: no {wanted} found{}", if *.empty { " (the file is empty)" } else { "" })]
    Nothing {
        /// The file.
        path: String,
        /// What was looked for.
        wanted: String,
        /// Whether the file has no text at all.
        empty: bool,
    },
}

/// The text ", did you mean `x`?" or nothing.
pub(crate) fn hint(nearest: Option<&String>) -> String {
    nearest.map_or_else(String::new, |n| format!("; did you mean `{n}`?"))
}

/// The name nearest to `name` among `known`, when it is near enough to be a likely slip.
pub fn nearest<'a>(name: &str, known: impl IntoIterator<Item = &'a str>) -> Option<String> {
    let lower = name.to_lowercase();
    known
        .into_iter()
        .map(|k| (strsim::damerau_levenshtein(&lower, &k.to_lowercase()), k))
        .filter(|&(d, k)| d <= 1 + k.len().max(name.len()) / 4)
        .min_by_key(|&(d, k)| (d, k.len().abs_diff(name.len())))
        .map(|(_, k)| k.to_owned())
}

/// Text of a file with the name it goes by in messages.
#[derive(Debug, Clone)]
pub struct Source {
    /// The name used in messages.
    pub path: Arc<str>,
    /// The whole text.
    pub text: Arc<str>,
    /// The folder that relative includes start from.
    pub folder: PathBuf,
}

impl Source {
    /// Text given directly; `name` stands for the file in messages.
    pub fn from_text(name: &str, text: &str) -> Self {
        Self { path: name.into(), text: text.into(), folder: PathBuf::new() }
    }

    /// Reads a file, decompressing it when it is gzip (by its first two bytes, not its name).
    ///
    /// # Errors
    /// The file cannot be opened, is not UTF-8, or is a damaged gzip stream.
    pub fn open(path: &Path) -> Result<Self, ReadError> {
        let name = path.display().to_string();
        let bytes = std::fs::read(path).map_err(|e| ReadError::of_io(&name, &e))?;
        let bytes = if bytes.starts_with(&[0x1f, 0x8b]) {
            let mut out = Vec::new();
            flate2::read::MultiGzDecoder::new(&bytes[..])
                .read_to_end(&mut out)
                .map_err(|e| ReadError::Gzip { path: name.clone(), reason: e.to_string() })?;
            out
        } else {
            bytes
        };
        let folder = path.parent().map_or_else(PathBuf::new, Path::to_path_buf);
        let path: Arc<str> = name.into();
        match String::from_utf8(bytes) {
            Ok(text) => Ok(Self { path, text: text.into(), folder }),
            Err(e) => {
                let good = e.utf8_error().valid_up_to();
                let bytes = e.into_bytes();
                let before = String::from_utf8_lossy(&bytes[..good]).into_owned();
                Err(ReadError::NotText { at: Place::of_offset(&path, &before, good), byte: bytes[good] })
            }
        }
    }

    /// The error for a file that holds none of what was wanted.
    pub fn nothing(&self, wanted: &str) -> ReadError {
        ReadError::Nothing {
            path: self.path.to_string(),
            wanted: wanted.to_owned(),
            empty: self.text.trim().is_empty(),
        }
    }
}

/// Where a reader that works piece by piece takes its text from: never the whole file in memory.
///
/// Gzip is recognised by its first two bytes and undone on the way.
pub struct Input {
    /// The name used in messages.
    pub path: Arc<str>,
    /// The folder that relative includes start from.
    pub folder: PathBuf,
    origin: Origin,
}

enum Origin {
    Text(Arc<str>),
    File(PathBuf),
    /// Text that is nevertheless given piece by piece.
    #[cfg(test)]
    Pieces(Arc<str>),
    /// A stream, until it is opened.
    Stream(Option<Box<dyn std::io::Read + Send>>),
}

impl fmt::Debug for Input {
    fn fmt(&self, f: &mut fmt::Formatter<'_>) -> fmt::Result {
        f.debug_struct("Input").field("path", &self.path).finish_non_exhaustive()
    }
}

impl Input {
    /// A file, opened when it is read.
    pub fn file(path: &Path) -> Self {
        Self {
            path: path.display().to_string().into(),
            folder: path.parent().map_or_else(PathBuf::new, Path::to_path_buf),
            origin: Origin::File(path.to_owned()),
        }
    }

    /// A stream that can be read once; `name` stands for it in messages.
    pub fn stream(name: &str, reader: impl std::io::Read + Send + 'static) -> Self {
        Self { path: name.into(), folder: PathBuf::new(), origin: Origin::Stream(Some(Box::new(reader))) }
    }

    /// Standard input, under the name `-`.
    pub fn stdin() -> Self {
        Self::stream("-", std::io::stdin())
    }

    /// Standard input for `-`, a file for any other name.
    pub fn named(name: &str) -> Self {
        if name == "-" { Self::stdin() } else { Self::file(Path::new(name)) }
    }

    #[cfg(test)]
    pub(crate) fn in_pieces(name: &str, text: &str) -> Self {
        Self { path: name.into(), folder: PathBuf::new(), origin: Origin::Pieces(text.into()) }
    }

    /// Whether the input can be read a second time.
    pub(crate) fn is_lasting(&self) -> bool {
        !matches!(self.origin, Origin::Stream(_))
    }

    /// The text, or an empty one and the reader that gives it.
    pub(crate) fn take(&mut self) -> Result<(Arc<str>, Option<Box<dyn std::io::Read + Send>>), ReadError> {
        match &mut self.origin {
            Origin::Text(text) => Ok((Arc::clone(text), None)),
            #[cfg(test)]
            Origin::Pieces(text) => {
                Ok(("".into(), Some(Box::new(std::io::Cursor::new(text.as_bytes().to_vec())))))
            }
            Origin::File(path) => match std::fs::File::open(&*path) {
                Ok(file) => Ok(("".into(), Some(Box::new(file)))),
                Err(e) => Err(ReadError::of_io(&path.display().to_string(), &e)),
            },
            Origin::Stream(reader) => match reader.take() {
                Some(reader) => Ok(("".into(), Some(reader))),
                None => Err(ReadError::Io {
                    path: self.path.to_string(),
                    reason: "a stream can be read once only; name it once, or save it as a file".into(),
                    missing: false,
                }),
            },
        }
    }
}

impl From<Source> for Input {
    fn from(source: Source) -> Self {
        Self { path: source.path, folder: source.folder, origin: Origin::Text(source.text) }
    }
}

impl ReadError {
    /// The error for a file that the operating system would not open.
    fn of_io(path: &str, e: &std::io::Error) -> Self {
        let missing = e.kind() == std::io::ErrorKind::NotFound;
        let reason = if missing { "no such file".into() } else { e.to_string() };
        Self::Io { path: path.to_owned(), reason, missing }
    }
}
