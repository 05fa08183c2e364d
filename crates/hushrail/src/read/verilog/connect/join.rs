//! Nets that turn out to be one.

use super::body::{FLOATING, ONE, RESERVED, ZERO};

/// Sets of nets; each set goes by its smallest member, so a constant stays one and the uppermost name wins.
#[derive(Default)]
pub(super) struct Join {
    parent: Vec<u32>,
}

impl Join {
    /// Adds nets; the number of the first.
    pub(super) fn new_nets(&mut self, n: u32) -> u32 {
        let first = u32::try_from(self.parent.len()).unwrap_or(u32::MAX);
        self.parent.extend(first..first.saturating_add(n));
        first
    }

    pub(super) fn root(&mut self, mut net: u32) -> u32 {
        while self.parent[net as usize] != net {
            let above = self.parent[net as usize];
            self.parent[net as usize] = self.parent[above as usize];
            net = above;
        }
        net
    }

    /// Makes two nets one; false, and nothing changes, when they are zero and one.
    pub(super) fn join(&mut self, a: u32, b: u32) -> bool {
        let (a, b) = (self.root(a), self.root(b));
        let (low, high) = (a.min(b), a.max(b));
        if low == FLOATING {
            // a pin tied to nothing drives nothing, and two such pins are not one net
            return true;
        }
        if high < RESERVED && low != high {
            return !(low == ZERO && high == ONE);
        }
        self.parent[high as usize] = low;
        true
    }

    /// The new number of each old net and the old number of each new one.
    pub(super) fn numbered(mut self) -> (Vec<u32>, Vec<u32>) {
        let mut new = vec![0; self.parent.len()];
        let mut old = Vec::new();
        for net in 0..u32::try_from(self.parent.len()).unwrap_or(u32::MAX) {
            let root = self.root(net);
            if root == net {
                new[net as usize] = u32::try_from(old.len()).unwrap_or(u32::MAX);
                old.push(net);
            } else {
                // a root is smaller, so it has its number already
                new[net as usize] = new[root as usize];
            }
        }
        (new, old)
    }
}
