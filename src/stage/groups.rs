//! Which nodes hang together: disjoint sets with path halving (Tarjan & van Leeuwen 1984).

/// Disjoint sets of the numbers 0 to n − 1.
#[derive(Clone, Debug)]
pub(super) struct Groups {
    parent: Vec<usize>,
}

impl Groups {
    pub(super) fn of_singles(count: usize) -> Self {
        Groups {
            parent: (0..count).collect(),
        }
    }

    /// The number that stands for the group of `member`.
    pub(super) fn root(&mut self, mut member: usize) -> usize {
        while self.parent[member] != member {
            self.parent[member] = self.parent[self.parent[member]];
            member = self.parent[member];
        }
        member
    }

    /// Joins two groups; false where they were one already. The smaller root stays, so that 0 stands for its group.
    pub(super) fn join(&mut self, one: usize, other: usize) -> bool {
        let (one, other) = (self.root(one), self.root(other));
        self.parent[one.max(other)] = one.min(other);
        one != other
    }

    pub(super) fn are_joined(&mut self, one: usize, other: usize) -> bool {
        self.root(one) == self.root(other)
    }
}

#[cfg(test)]
mod tests {
    use super::*;

    #[test]
    fn joined_members_share_the_smallest_root() {
        let mut groups = Groups::of_singles(5);
        assert!(groups.join(4, 3) && groups.join(3, 0));
        assert!(!groups.join(0, 4));
        assert!(groups.are_joined(4, 0) && !groups.are_joined(1, 0));
        assert_eq!(groups.root(4), 0);
    }
}
