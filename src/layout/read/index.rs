//! Names of rows, found without a second copy of any of them.

use std::collections::HashMap;
use std::hash::{BuildHasher, RandomState};

use compact_str::CompactString;

use crate::cores;

/// Bits of a key that hold the index; the others hold the beginning of the hash.
const INDEX_BITS: u32 = 24;
const INDEX_MASK: u64 = (1 << INDEX_BITS) - 1;

/// Hashes of names with the indices of their rows, in order. Names are hashed one after the
/// other and the list is sorted once, which stays in the near memory where a table of a
/// million slots would not.
pub(super) struct NameIndex {
    keys: Vec<u64>,
    hasher: RandomState,
}

impl NameIndex {
    /// The index of a list of fewer than 2²⁴ names, and those that stand in it twice: the
    /// later and the first index of each.
    pub(super) fn of<'n>(
        count: usize,
        name_of: impl Fn(u32) -> &'n str + Sync,
    ) -> (NameIndex, Vec<(u32, u32)>) {
        debug_assert!(count as u64 <= INDEX_MASK);
        let hasher = RandomState::new();
        let mut keys = cores::map(count, cores::MANY, |index| {
            (hasher.hash_one(name_of(index as u32)) & !INDEX_MASK) | index as u64
        });
        cores::sort(&mut keys);
        let mut twice = Vec::new();
        // The first of each name among those of one hash, which are one name as a rule.
        let mut firsts: Vec<u32> = Vec::new();
        for same_hash in keys.chunk_by(|a, b| hash_of(*a) == hash_of(*b)) {
            if let [_] = same_hash {
                continue;
            }
            firsts.clear();
            for index in same_hash.iter().map(|key| index_of(*key)) {
                match firsts.iter().find(|first| name_of(**first) == name_of(index)) {
                    Some(first) => twice.push((index, *first)),
                    None => firsts.push(index),
                }
            }
        }
        (NameIndex { keys, hasher }, twice)
    }

    /// The index of a name.
    pub(super) fn find<'n>(&self, name: &str, name_of: impl Fn(u32) -> &'n str) -> Option<u32> {
        let hash = hash_of(self.hasher.hash_one(name));
        let first = self.keys.partition_point(|key| hash_of(*key) < hash);
        let same_hash = self.keys[first..].iter().take_while(|key| hash_of(**key) == hash);
        same_hash.map(|key| index_of(*key)).find(|index| name_of(*index) == name)
    }

    /// Replaces every index by another, after the list was put into another order. Of a name
    /// that stands there twice any row may be found from then on.
    pub(super) fn renumber(&mut self, new: impl Fn(u32) -> u32) {
        for key in &mut self.keys {
            *key = (*key & !INDEX_MASK) | u64::from(new(index_of(*key)));
        }
    }
}

/// Numbers of names, of which the later counts where one stands twice. A few are compared one
/// by one, which costs less than to hash each of a million names that are looked for.
pub(super) enum ByName {
    Few(Vec<CompactString>),
    Many(HashMap<CompactString, usize>),
}

impl ByName {
    pub(super) fn of(names: impl ExactSizeIterator<Item = CompactString>) -> ByName {
        const FEW: usize = 8;
        if names.len() <= FEW {
            ByName::Few(names.collect())
        } else {
            ByName::Many(names.zip(0..).collect())
        }
    }

    /// The number of a name, from 0.
    pub(super) fn find(&self, name: &str) -> Option<usize> {
        match self {
            ByName::Few(few) => few.iter().rposition(|known| known == name),
            ByName::Many(many) => many.get(name).copied(),
        }
    }
}

fn hash_of(key: u64) -> u64 {
    key >> INDEX_BITS
}

fn index_of(key: u64) -> u32 {
    (key & INDEX_MASK) as u32
}

#[cfg(test)]
mod tests {
    use super::*;

    #[test]
    fn finds_every_name_and_no_other() {
        let names: Vec<String> = (0..2000).map(|number| format!("n{}", number % 900)).collect();
        let name_of = |index: u32| names[index as usize].as_str();
        let (index, mut twice) = NameIndex::of(names.len(), name_of);
        twice.sort_unstable();
        assert!(twice.iter().copied().eq((900..2000).map(|number| (number, number % 900))));
        assert_eq!(index.find("n7", name_of), Some(7));
        assert_eq!(index.find("n900", name_of), None);
        assert_eq!(NameIndex::of(0, |_| "").0.find("", |_| ""), None);
    }

    #[test]
    fn few_names_are_found_like_many() {
        for count in [0, 1, 8, 9, 100] {
            let names = (0..count).map(|number| CompactString::from(format!("n{number}")));
            let again = ByName::of(names.clone().collect::<Vec<_>>().into_iter());
            for (number, name) in names.enumerate() {
                assert_eq!(again.find(&name), Some(number));
            }
            assert_eq!(again.find("n"), None);
        }
        for others in [0, 20] {
            let mut names = vec![CompactString::from("a"), "a".into()];
            names.extend((0..others).map(|number| CompactString::from(format!("n{number}"))));
            assert_eq!(ByName::of(names.into_iter()).find("a"), Some(1));
        }
    }
}
