//! Every n-th of a long row, so that no more than a fixed number is kept.

use serde::{Deserialize, Serialize};

/// A row that keeps every n-th of what is pushed; n doubles whenever the row is full.
#[derive(Debug, Clone, PartialEq, Serialize, Deserialize)]
pub struct Thinned<T> {
    /// How many were pushed.
    pub of: u64,
    /// Every how manyth is kept.
    pub every: u64,
    /// Those that are kept.
    pub kept: Vec<T>,
    #[serde(skip)]
    most: usize,
}

impl<T> Thinned<T> {
    /// An empty row that keeps `most` at most.
    #[must_use]
    pub fn new(most: usize) -> Self {
        Self { of: 0, every: 1, kept: Vec::new(), most: most.max(2) }
    }

    /// Takes the next.
    pub fn push(&mut self, item: T) {
        if self.wants_next() {
            if self.kept.len() == self.most {
                self.every *= 2;
                let mut keep = false;
                self.kept.retain(|_| {
                    keep = !keep;
                    keep
                });
            }
            if self.wants_next() {
                self.kept.push(item);
            }
        }
        self.of += 1;
    }

    /// True if the next would be kept; one that is dear to make need not be made otherwise.
    #[must_use]
    pub fn wants_next(&self) -> bool {
        self.of.is_multiple_of(self.every)
    }

    /// Counts one that was not wanted.
    pub fn skip(&mut self) {
        self.of += 1;
    }
}

#[cfg(test)]
mod tests {
    use super::*;

    #[test]
    fn every_nth_is_kept_from_the_first_on() {
        let mut row = Thinned::new(10);
        (0..1000u64).for_each(|k| row.push(k));
        assert_eq!((row.of, row.every), (1000, 128));
        assert_eq!(row.kept, [0, 128, 256, 384, 512, 640, 768, 896]);
        let mut short = Thinned::new(10);
        (0..10u64).for_each(|k| short.push(k));
        assert_eq!((short.every, short.kept.len()), (1, 10));
    }
}
