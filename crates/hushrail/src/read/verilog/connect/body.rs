//! A module as it is written: nets by bits, instances, and what their pins are tied to by name.

use super::ports::Direction;
use crate::read::source::Place;

/// The nets every module has: the constants, an unknown level and no drive at all.
pub(super) const RESERVED: u32 = 4;
pub(super) const ZERO: u32 = 0;
pub(super) const ONE: u32 = 1;
pub(super) const UNKNOWN: u32 = 2;
pub(super) const FLOATING: u32 = 3;

/// A port given by position, not by name.
pub(super) const POSITION: u32 = 1 << 31;
/// A value that takes the width of its port.
pub(super) const UNSIZED: u32 = 1 << 30;
pub(super) const PORT: u32 = UNSIZED - 1;

/// A net or vector of nets.
#[derive(Debug, Clone, Copy)]
pub(super) struct Decl {
    pub(super) name: u32,
    /// The number of its leftmost bit; the others follow.
    pub(super) base: u32,
    pub(super) left: i32,
    pub(super) right: i32,
}

impl Decl {
    pub(super) fn width(&self) -> u32 {
        self.left.abs_diff(self.right) + 1
    }

    /// The net of an index.
    pub(super) fn bit(&self, index: i64) -> Option<u32> {
        let (left, right) = (i64::from(self.left), i64::from(self.right));
        let inside = (left.min(right)..=left.max(right)).contains(&index);
        inside.then(|| u32::try_from(left.abs_diff(index)).ok().map(|n| self.base + n)).flatten()
    }

    /// The index of a net of this vector.
    pub(super) fn index(&self, bit: u32) -> i64 {
        let n = i64::from(bit - self.base);
        if self.left > self.right { i64::from(self.left) - n } else { i64::from(self.left) + n }
    }
}

/// A line and a column of a file.
#[derive(Debug, Clone, Copy, Default)]
pub(super) struct Loc {
    pub(super) file: u32,
    pub(super) line: u32,
    pub(super) column: u32,
}

#[derive(Debug, Clone, Copy)]
pub(super) struct Inst {
    pub(super) name: u32,
    pub(super) master: u32,
    /// Where its connections begin.
    pub(super) conns: u32,
    pub(super) loc: Loc,
}

#[derive(Debug, Clone, Copy)]
pub(super) struct Conn {
    /// Name or position of the port, with flags.
    pub(super) port: u32,
    /// Where its bits begin, leftmost first.
    pub(super) bits: u32,
}

#[derive(Debug, Clone)]
pub(super) struct BodyPort {
    pub(super) name: u32,
    /// The net behind it.
    pub(super) net: u32,
    pub(super) decl: usize,
    pub(super) direction: Option<Direction>,
    pub(super) loc: Loc,
}

#[derive(Debug)]
pub(super) struct Body {
    pub(super) name: u32,
    pub(super) at: Place,
    pub(super) ports: Vec<BodyPort>,
    pub(super) decls: Vec<Decl>,
    /// How many nets, the reserved ones among them.
    pub(super) nets: u32,
    pub(super) insts: Vec<Inst>,
    /// Ends of instance arrays by position in `insts`, ascending.
    pub(super) arrays: Vec<(u32, i64, i64)>,
    pub(super) conns: Vec<Conn>,
    pub(super) bits: Vec<u32>,
    /// Nets that are one.
    pub(super) aliases: Vec<(u32, u32)>,
    pub(super) has_assigns: bool,
}

impl Body {
    pub(super) fn is_black_box(&self) -> bool {
        self.insts.is_empty() && !self.has_assigns
    }

    /// Connections of an instance by position.
    pub(super) fn conns_of(&self, inst: usize) -> std::ops::Range<usize> {
        let end = self.insts.get(inst + 1).map_or(self.conns.len(), |i| i.conns as usize);
        self.insts[inst].conns as usize..end
    }

    /// The bits of a connection.
    pub(super) fn bits_of(&self, conn: usize) -> &[u32] {
        let end = self.conns.get(conn + 1).map_or(self.bits.len(), |c| c.bits as usize);
        self.bits.get(self.conns[conn].bits as usize..end).unwrap_or_default()
    }
}
