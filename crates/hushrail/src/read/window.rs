//! Text that is read piece by piece: a window onto a file that slides, and the places of what has left it.
//!
//! A reader works in the window until it meets its end, says from where on it still needs the text, and goes on in
//! the next window. What is kept is what the reader asks for, so memory does not grow with the file; one token
//! longer than the window makes the window grow.

use std::io::Read;
use std::path::PathBuf;
use std::sync::Arc;

use super::source::{Input, Place, ReadError};

/// Bytes asked for at a time: few enough to stay in the second cache and not to be given back to the system.
pub(crate) const PIECE: usize = 1 << 16;

/// How far the lines of a file have been counted.
#[derive(Debug, Clone, Copy)]
struct Mark {
    offset: usize,
    line: usize,
    column: usize,
}

const START: Mark = Mark { offset: 0, line: 1, column: 1 };

impl Mark {
    /// The mark after `passed`, which begins at this one.
    fn after(self, passed: &[u8]) -> Self {
        let characters = |bytes: &[u8]| bytes.iter().filter(|&&b| b & 0xc0 != 0x80).count();
        let column = match memchr::memrchr(b'\n', passed) {
            Some(i) => 1 + characters(&passed[i + 1..]),
            None => self.column + characters(passed),
        };
        let line = self.line + memchr::memchr_iter(b'\n', passed).count();
        Self { offset: self.offset + passed.len(), line, column }
    }
}

/// What is still to be read of a file.
struct Feed {
    reader: Box<dyn Read + Send>,
    gzip: bool,
    /// What was read last.
    bytes: Vec<u8>,
    /// How many of its first bytes begin a character whose last bytes are yet to come.
    cut: usize,
    piece: usize,
}

/// The part of a text that is in memory.
pub(crate) struct Window {
    path: Arc<str>,
    /// The folder that relative includes start from.
    pub(crate) folder: PathBuf,
    text: Arc<str>,
    /// Where in the file the window begins.
    first: Mark,
    /// Where places were last counted to.
    mark: Mark,
    feed: Option<Feed>,
    /// Places of offsets before the window that somebody still needs.
    kept: Vec<(usize, Place)>,
    /// Whether no text but white space has been seen.
    blank: bool,
}

impl Window {
    /// Opens an input at its beginning. A stream can be opened once.
    pub(crate) fn open(input: &mut Input, piece: usize) -> Result<Self, ReadError> {
        let (text, reader) = input.take()?;
        let mut window = Self {
            path: Arc::clone(&input.path),
            folder: input.folder.clone(),
            blank: text.trim().is_empty(),
            text,
            first: START,
            mark: START,
            feed: None,
            kept: Vec::new(),
        };
        if let Some(mut reader) = reader {
            let mut magic = [0; 2];
            let mut got = 0;
            while got < 2 {
                match reader.read(&mut magic[got..]) {
                    Ok(0) => break,
                    Ok(n) => got += n,
                    Err(e) if e.kind() == std::io::ErrorKind::Interrupted => {}
                    Err(e) => return Err(window.unreadable(&e, false)),
                }
            }
            let whole = std::io::Cursor::new(magic[..got].to_vec()).chain(reader);
            let gzip = got == 2 && magic == [0x1f, 0x8b];
            let reader: Box<dyn Read + Send> =
                if gzip { Box::new(flate2::read::MultiGzDecoder::new(whole)) } else { Box::new(whole) };
            window.feed = Some(Feed { reader, gzip, bytes: Vec::new(), cut: 0, piece: piece.max(4) });
            window.slide(0, &[])?;
        }
        Ok(window)
    }

    fn unreadable(&self, e: &std::io::Error, gzip: bool) -> ReadError {
        let path = self.path.to_string();
        let reason = e.to_string();
        if gzip { ReadError::Gzip { path, reason } } else { ReadError::Io { path, reason, missing: false } }
    }

    /// The text in the window.
    pub(crate) fn text(&self) -> &Arc<str> {
        &self.text
    }

    /// Where in the file the window begins.
    pub(crate) fn base(&self) -> usize {
        self.first.offset
    }

    /// Whether text may follow the window.
    pub(crate) fn has_more(&self) -> bool {
        self.feed.is_some()
    }

    /// Puts what follows into the window, which then begins at the present `keep`; false, and nothing changes,
    /// when nothing follows. The places of `needed` offsets remain known.
    pub(crate) fn slide(&mut self, keep: usize, needed: &[usize]) -> Result<bool, ReadError> {
        let Some(mut feed) = self.feed.take() else { return Ok(false) };
        let kept = self.text.get(keep..).unwrap_or_default();
        // a window that grows doubles, so growing costs no more than the reading did
        let wanted = feed.piece.max(kept.len());
        let cut = feed.cut;
        if feed.bytes.len() < cut + wanted {
            feed.bytes.resize(cut + wanted, 0);
        }
        let mut length = cut;
        while length < cut + wanted {
            match feed.reader.read(&mut feed.bytes[length..cut + wanted]) {
                Ok(0) => break,
                Ok(n) => length += n,
                Err(e) if e.kind() == std::io::ErrorKind::Interrupted => {}
                Err(e) => return Err(self.unreadable(&e, feed.gzip)),
            }
        }
        if length == 0 {
            return Ok(false);
        }
        let (bytes, ended) = (&feed.bytes[..length], length == cut);
        let good = match std::str::from_utf8(bytes) {
            Ok(text) => text,
            Err(e) => {
                let good = e.valid_up_to();
                if e.error_len().is_some() || ended {
                    let before = [self.text.as_bytes(), &bytes[..good]].concat();
                    let mark = self.first.after(&before);
                    let at = Place::new(&self.path, mark.line, mark.column);
                    return Err(ReadError::NotText { at, byte: bytes[good] });
                }
                std::str::from_utf8(&bytes[..good]).unwrap_or_default()
            }
        };
        self.blank &= good.trim_start().is_empty();
        let used = good.len();
        let joined: Arc<str> = if kept.is_empty() { good.into() } else { [kept, good].concat().into() };
        feed.bytes.copy_within(used..length, 0);
        feed.cut = length - used;
        let start = self.first.offset + keep;
        self.kept.retain(|(offset, _)| needed.contains(offset));
        for &offset in needed {
            if (self.first.offset..start).contains(&offset) && !self.kept.iter().any(|k| k.0 == offset) {
                let place = self.place(offset);
                self.kept.push((offset, place));
            }
        }
        self.count_to(start);
        self.first = self.mark;
        self.text = joined;
        self.feed = Some(feed);
        Ok(true)
    }

    fn count_to(&mut self, offset: usize) {
        if offset < self.mark.offset {
            self.mark = self.first;
        }
        let from = self.mark.offset - self.first.offset;
        let to = offset.saturating_sub(self.first.offset).clamp(from, self.text.len().max(from));
        self.mark = self.mark.after(self.text.as_bytes().get(from..to).unwrap_or_default());
    }

    /// The place of an offset in the window, or of one that was needed when the window left it.
    pub(crate) fn place(&self, offset: usize) -> Place {
        if let Some((_, place)) = self.kept.iter().find(|k| k.0 == offset) {
            return place.clone();
        }
        let end = offset.saturating_sub(self.first.offset).min(self.text.len());
        let mark = self.first.after(&self.text.as_bytes()[..end]);
        Place::new(&self.path, mark.line, mark.column)
    }

    /// Line and column like `place`, but counted on from the last: many places of one file cost one pass.
    pub(crate) fn next_place(&mut self, offset: usize) -> (usize, usize) {
        self.count_to(offset);
        (self.mark.line, self.mark.column)
    }

    /// Lets go of the text of a file that has been read.
    pub(crate) fn close(&mut self) {
        self.count_to(self.first.offset + self.text.len());
        self.first = self.mark;
        self.text = "".into();
        self.feed = None;
    }

    /// The name of the file.
    pub(crate) fn path(&self) -> &Arc<str> {
        &self.path
    }

    /// The error for a file that holds none of what was wanted, after all of it has been read.
    pub(crate) fn nothing(&self, wanted: &str) -> ReadError {
        ReadError::Nothing { path: self.path.to_string(), wanted: wanted.to_owned(), empty: self.blank }
    }
}
