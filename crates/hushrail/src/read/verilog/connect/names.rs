//! Names, each kept once: one text, where each ends, and an open table of their numbers.

use std::hash::Hasher as _;

use rustc_hash::FxHasher;

/// Names by number, numbers by name.
#[derive(Debug, Clone, Default)]
pub(super) struct Names {
    text: String,
    ends: Vec<u32>,
    /// A number and one with half a hash above it, or zero; the length is a power of two.
    table: Vec<u64>,
}

impl Names {
    /// The hash of a name: its low bits choose the slot, its high bits tell names apart without their text.
    fn hash(name: &str) -> u64 {
        let mut hasher = FxHasher::default();
        hasher.write(name.as_bytes());
        hasher.finish()
    }

    /// Where a name is in the table, or where it would go.
    fn slot(&self, name: &str, hash: u64) -> Result<u32, usize> {
        let Some(mask) = self.table.len().checked_sub(1) else { return Err(0) };
        let mut slot = low(hash) & mask;
        loop {
            match self.table[slot] {
                0 => return Err(slot),
                found if found >> 32 == hash >> 32 => {
                    let id = u32::try_from(found & 0xffff_ffff).unwrap_or(1) - 1;
                    if self.get(id) == name {
                        return Ok(id);
                    }
                }
                _ => {}
            }
            slot = (slot + 1) & mask;
        }
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
        if self.table.is_empty() { None } else { self.slot(name, Self::hash(name)).ok() }
    }

    /// The number of a name, which is new or known; nothing when names take more than 4 GiB.
    pub(super) fn intern(&mut self, name: &str) -> Option<u32> {
        if self.ends.len() * 4 >= self.table.len() * 3 {
            self.grow();
        }
        let hash = Self::hash(name);
        let slot = match self.slot(name, hash) {
            Ok(id) => return Some(id),
            Err(slot) => slot,
        };
        let id = u32::try_from(self.ends.len()).ok().filter(|&id| id < 1 << 30)?;
        let end = u32::try_from(self.text.len() + name.len()).ok()?;
        self.text.push_str(name);
        self.ends.push(end);
        self.table[slot] = u64::from(id + 1) | hash >> 32 << 32;
        Some(id)
    }

    fn grow(&mut self) {
        let length = (self.table.len() * 2).max(64);
        self.table = vec![0; length];
        for id in 0..u32::try_from(self.ends.len()).unwrap_or(u32::MAX) {
            let hash = Self::hash(self.get(id));
            let mut slot = low(hash) & (length - 1);
            while self.table[slot] != 0 {
                slot = (slot + 1) & (length - 1);
            }
            self.table[slot] = u64::from(id + 1) | hash >> 32 << 32;
        }
    }

    pub(super) fn shrink(&mut self) {
        self.text.shrink_to_fit();
        self.ends.shrink_to_fit();
    }

    pub(super) fn heap_bytes(&self) -> usize {
        self.text.capacity() + 4 * self.ends.capacity() + 8 * self.table.capacity()
    }
}

fn low(hash: u64) -> usize {
    usize::try_from(hash & 0xffff_ffff).unwrap_or_default()
}
