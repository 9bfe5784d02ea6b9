//! Loops of branches that hold a voltage whatever the current: rails, ideal sources, zero ohms.

use std::collections::HashMap;

use super::check::NetworkPlace;
use super::groups::Groups;

/// A branch that holds a voltage whatever the current.
pub(super) struct Stiff {
    pub(super) ends: [usize; 2],
    pub(super) name: String,
    pub(super) place: NetworkPlace,
}

/// The message of the branch that closes a loop with `others`.
pub(super) fn loop_message(closing: &str, others: Vec<String>) -> String {
    match &others[..] {
        [] => format!("{closing} is bridged by zero ohms; its current would be undetermined"),
        _ => format!(
            "{closing} and {} form a loop without resistance; give one of them a resistance",
            others.join(", ")
        ),
    }
}

/// Branches that close no loop, so that the path between two nodes is unique.
pub(super) struct Forest {
    groups: Groups,
    branches: Vec<Vec<(usize, String)>>,
}

impl Forest {
    pub(super) fn of(count: usize) -> Self {
        Forest {
            groups: Groups::of_singles(count),
            branches: vec![Vec::new(); count],
        }
    }

    /// Adds a branch; false where it would close a loop.
    pub(super) fn add(&mut self, ends: [usize; 2], name: String) -> bool {
        let open = self.groups.join(ends[0], ends[1]);
        if open {
            self.branches[ends[0]].push((ends[1], name.clone()));
            self.branches[ends[1]].push((ends[0], name));
        }
        open
    }

    /// The names of the branches between two nodes of one tree.
    pub(super) fn path(&self, ends: [usize; 2]) -> Vec<String> {
        let mut came_from: HashMap<usize, (usize, &str)> = HashMap::new();
        let mut front = vec![ends[0]];
        while let Some(node) = front.pop() {
            for (next, name) in &self.branches[node] {
                if *next != ends[0] && !came_from.contains_key(next) {
                    came_from.insert(*next, (node, name));
                    front.push(*next);
                }
            }
        }
        let mut names = Vec::new();
        let mut node = ends[1];
        while let Some((previous, name)) = came_from.get(&node).filter(|_| node != ends[0]) {
            names.push((*name).to_owned());
            node = *previous;
        }
        // A long loop is told by its beginning.
        if names.len() > 6 {
            let rest = names.len() - 6;
            names.truncate(6);
            names.push(format!("{rest} more"));
        }
        names
    }
}
