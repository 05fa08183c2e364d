//! Names, each kept once: one text, where each ends, and an open table of their numbers.

use std::hash::Hasher as _;

use rustc_hash::FxHasher;

/// Names by number, numbers by name.
#[derive(Debug, Clone, Default)]
pub(super) struct Names {
    text: String,
    ends: Vec<u32>,
    /// A number and one, or zero; the length is a power of two.
    table: Vec<u32>,
}

impl Names {
    fn hash(name: &str) -> usize {
        let mut hasher = FxHasher::default();
        hasher.write(name.as_bytes());
        // the table is smaller than half the numbers, and high bits are the mixed ones
        usize::try_from(hasher.finish() >> 16 & 0xffff_ffff).unwrap_or_default()
    }

    pub(super) fn get(&self, id: u32) -> &str {
        let id = id as usize;
        let start = id.checked_sub(1).and_then(|i| self.ends.get(i)).map_or(0, |&e| e as usize);
        let end = self.ends.get(id).map_or(start, |&e| e as usize);
        self.text.get(start..end).unwrap_or_default()
    }

    pub(super) fn len(&self) -> usize {
        self.ends.len()
    }

    pub(super) fn find(&self, name: &str) -> Option<u32> {
        let mask = self.table.len().checked_sub(1)?;
        let mut slot = Self::hash(name) & mask;
        loop {
            match self.table[slot] {
                0 => return None,
                n if self.get(n - 1) == name => return Some(n - 1),
                _ => slot = (slot + 1) & mask,
            }
        }
    }

    /// The number of a name, which is new or known; nothing when names take more than 4 GiB.
    pub(super) fn intern(&mut self, name: &str) -> Option<u32> {
        if self.ends.len() * 4 >= self.table.len() * 3 {
            self.grow();
        }
        let mask = self.table.len() - 1;
        let mut slot = Self::hash(name) & mask;
        loop {
            match self.table[slot] {
                0 => break,
                n if self.get(n - 1) == name => return Some(n - 1),
                _ => slot = (slot + 1) & mask,
            }
        }
        let id = u32::try_from(self.ends.len()).ok().filter(|&id| id < 1 << 30)?;
        let end = u32::try_from(self.text.len() + name.len()).ok()?;
        self.text.push_str(name);
        self.ends.push(end);
        self.table[slot] = id + 1;
        Some(id)
    }

    fn grow(&mut self) {
        let length = (self.table.len() * 2).max(64);
        self.table = vec![0; length];
        for id in 0..self.ends.len() {
            let id = u32::try_from(id).unwrap_or_default();
            let mut slot = Self::hash(self.get(id)) & (length - 1);
            while self.table[slot] != 0 {
                slot = (slot + 1) & (length - 1);
            }
            self.table[slot] = id + 1;
        }
    }

    pub(super) fn shrink(&mut self) {
        self.text.shrink_to_fit();
        self.ends.shrink_to_fit();
    }

    pub(super) fn heap_bytes(&self) -> usize {
        self.text.capacity() + 4 * (self.ends.capacity() + self.table.capacity())
    }
}
