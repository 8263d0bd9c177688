//! Text interned as numbers: each distinct name is kept once.

use std::hash::BuildHasher;

use hashbrown::{DefaultHashBuilder, HashTable};

/// Names and their numbers; 0 is the unknown, others count from 1 in the order of their coming.
#[derive(Default)]
pub(super) struct Names {
    hasher: DefaultHashBuilder,
    numbers: HashTable<u32>,
    /// All names, one behind the other, and where each ends.
    text: String,
    ends: Vec<usize>,
    last: u32,
}

impl Names {
    /// The number of a name.
    pub(super) fn number(&mut self, name: &str) -> u32 {
        if name.is_empty() {
            return 0;
        }
        if self.last > 0 && self.name(self.last) == name {
            return self.last; // rows of one observer, or one data set, stand together
        }
        let hash = self.hasher.hash_one(name);
        let known = self.numbers.find(hash, |&n| at(&self.text, &self.ends, n) == name).copied();
        self.last = known.unwrap_or_else(|| self.add(hash, name));
        self.last
    }

    fn add(&mut self, hash: u64, name: &str) -> u32 {
        self.text.push_str(name);
        self.ends.push(self.text.len());
        let number = self.ends.len() as u32;
        let (hasher, text, ends) = (&self.hasher, &self.text, &self.ends);
        self.numbers.insert_unique(hash, number, |&n| hasher.hash_one(at(text, ends, n)));
        number
    }

    /// The name of a number; empty for the unknown.
    pub(super) fn name(&self, number: u32) -> &str {
        if number == 0 { "" } else { at(&self.text, &self.ends, number) }
    }

    /// The numbers that the names of another list have here; new ones are added.
    pub(super) fn adopt(&mut self, others: &Self) -> Vec<u32> {
        (0..=others.len() as u32).map(|n| self.number(others.name(n))).collect()
    }

    /// How many names there are.
    pub(super) fn len(&self) -> usize {
        self.ends.len()
    }

    /// The names in their order; the first is the unknown.
    pub(super) fn in_order(&self) -> Vec<String> {
        let mut names: Vec<String> = (0..=self.len() as u32).map(|n| self.name(n).to_owned()).collect();
        names[1..].sort_unstable();
        names
    }

    /// Rank of each number in the order of the names, so that results do not depend on row order.
    pub(super) fn order(&self) -> Vec<u32> {
        let mut by_name: Vec<u32> = (1..=self.len() as u32).collect();
        by_name.sort_unstable_by_key(|&n| self.name(n));
        let mut order = vec![0; self.len() + 1];
        by_name.iter().enumerate().for_each(|(rank, &n)| order[n as usize] = rank as u32 + 1);
        order
    }
}

fn at<'a>(text: &'a str, ends: &[usize], number: u32) -> &'a str {
    let n = number as usize;
    let from = if n > 1 { ends[n - 2] } else { 0 };
    &text[from..ends[n - 1]]
}

#[cfg(test)]
mod tests {
    use super::Names;

    #[test]
    fn each_name_is_kept_once() {
        let mut names = Names::default();
        let numbers: Vec<u32> = ["b", "", "a", "b", "a", "c"].iter().map(|n| names.number(n)).collect();
        assert_eq!(numbers, [1, 0, 2, 1, 2, 3]);
        assert_eq!((names.len(), names.name(2), names.name(0)), (3, "a", ""));
        assert_eq!(names.order(), [0, 2, 1, 3]);
    }

    #[test]
    fn lists_are_joined() {
        let (mut all, mut others) = (Names::default(), Names::default());
        all.number("a");
        assert_eq!(["c", "a"].map(|n| others.number(n)), [1, 2]);
        assert_eq!(all.adopt(&others), [0, 2, 1]);
    }
}
