//! The elements of a dyadic mesh over one period.

/// Positions in the period are counted in units of the period over 2 to this power.
pub(super) const FINEST: u32 = 44;

/// Finest element: the period over 2 to this power.
pub(super) const FINEST_LEVEL: u32 = 36;

/// One element of the mesh.
#[derive(Clone, Copy, Debug, PartialEq, Eq)]
pub(super) struct Element {
    pub(super) start: u64,
    pub(super) level: u32,
}

impl Element {
    pub(super) fn length(&self) -> u64 {
        1 << (FINEST - self.level)
    }
    pub(super) fn end(&self) -> u64 {
        self.start + self.length()
    }
    /// Phase in [0, 1] at `position` in [0, 1] of the element.
    pub(super) fn phase(&self, position: f64) -> f64 {
        (self.start as f64 + position * self.length() as f64) / (1u64 << FINEST) as f64
    }
    pub(super) fn halves(&self) -> [Element; 2] {
        let level = self.level + 1;
        let first = Element {
            start: self.start,
            level,
        };
        [
            first,
            Element {
                start: first.end(),
                level,
            },
        ]
    }
}
