//! Disjoint sets (Tarjan 1975), whose smallest member stands for them.

/// Sets of the numbers `0..len`.
#[derive(Default)]
pub(crate) struct Forest {
    parent: Vec<u32>,
}

impl Forest {
    /// With room for `most` members.
    pub fn new(most: usize) -> Self {
        Self {
            parent: Vec::with_capacity(most),
        }
    }

    /// `len` sets of one member each.
    pub fn restart(&mut self, len: usize) {
        self.parent.clear();
        self.parent.extend(0..len as u32);
    }

    /// The smallest member of the set that holds `member`. Halves the way to it.
    pub fn find(&mut self, mut member: u32) -> u32 {
        loop {
            let parent = self.parent[member as usize];
            if parent == member {
                return member;
            }
            let grandparent = self.parent[parent as usize];
            self.parent[member as usize] = grandparent;
            member = grandparent;
        }
    }

    /// Makes one set of two.
    pub fn join(&mut self, a: u32, b: u32) {
        let (a, b) = (self.find(a), self.find(b));
        self.parent[a.max(b) as usize] = a.min(b);
    }
}
