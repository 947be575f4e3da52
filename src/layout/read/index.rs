//! Names of rows, found without a second copy of any of them.

use std::hash::{BuildHasher, RandomState};

const FREE: u32 = u32::MAX;

/// A hash table of indices into a list whose elements have names. Open addressing with
/// linear steps, at most half full.
pub(super) struct NameIndex {
    slots: Vec<u32>,
    hasher: RandomState,
}

impl NameIndex {
    /// A table with room for a number of names.
    pub(super) fn with_room_for(count: usize) -> NameIndex {
        let size = (count.max(4) * 2).next_power_of_two();
        NameIndex { slots: vec![FREE; size], hasher: RandomState::new() }
    }

    /// Adds an index under its name, unless the name is there: then its index is returned.
    pub(super) fn add<'n>(
        &mut self,
        name: &str,
        index: u32,
        name_of: impl Fn(u32) -> &'n str,
    ) -> Option<u32> {
        let slot = self.slot(name, name_of);
        if self.slots[slot] != FREE {
            return Some(self.slots[slot]);
        }
        self.slots[slot] = index;
        None
    }

    /// The index of a name.
    pub(super) fn find<'n>(&self, name: &str, name_of: impl Fn(u32) -> &'n str) -> Option<u32> {
        let found = self.slots[self.slot(name, name_of)];
        (found != FREE).then_some(found)
    }

    /// Replaces every index by another, after the list was put into another order.
    pub(super) fn renumber(&mut self, new: impl Fn(u32) -> u32) {
        for slot in self.slots.iter_mut().filter(|slot| **slot != FREE) {
            *slot = new(*slot);
        }
    }

    /// Where a name is, or would be put.
    fn slot<'n>(&self, name: &str, name_of: impl Fn(u32) -> &'n str) -> usize {
        let mask = self.slots.len() - 1;
        let mut slot = self.hasher.hash_one(name) as usize & mask;
        while self.slots[slot] != FREE && name_of(self.slots[slot]) != name {
            slot = (slot + 1) & mask;
        }
        slot
    }
}

#[cfg(test)]
mod tests {
    use super::*;

    #[test]
    fn finds_every_name_and_no_other() {
        let names: Vec<String> = (0..1000).map(|number| format!("n{}", number % 900)).collect();
        let name_of = |index: u32| names[index as usize].as_str();
        let mut index = NameIndex::with_room_for(names.len());
        for (number, name) in (0_u32..).zip(&names) {
            let first = (number >= 900).then(|| number - 900);
            assert_eq!(index.add(name, number, name_of), first);
        }
        assert_eq!(index.find("n7", name_of), Some(7));
        assert_eq!(index.find("n900", name_of), None);
        assert_eq!(NameIndex::with_room_for(0).find("", |_| ""), None);
    }
}
