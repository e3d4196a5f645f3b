//! Marks on numbered things, set by several threads.

use std::sync::atomic::AtomicU64;
use std::sync::atomic::Ordering::Relaxed;

/// A mark for each of a number of things.
pub(super) struct Marks(Vec<AtomicU64>);

impl Marks {
    /// No marks on `n` things.
    pub(super) fn new(n: usize) -> Self {
        Self((0..n.div_ceil(64)).map(|_| AtomicU64::new(0)).collect())
    }

    /// True if thing `i` is marked.
    pub(super) fn is_marked(&self, i: usize) -> bool {
        let word = self.0.get(i / 64);
        word.is_some_and(|word| word.load(Relaxed) >> (i % 64) & 1 == 1)
    }

    /// A pen for one thread.
    pub(super) fn pen(&self) -> Pen<'_> {
        Pen {
            marks: self,
            word: 0,
            bits: 0,
        }
    }
}

/// Sets marks; those on neighbours are set together.
pub(super) struct Pen<'a> {
    marks: &'a Marks,
    word: usize,
    bits: u64,
}

impl Pen<'_> {
    /// Marks thing `i`.
    #[inline]
    pub(super) fn mark(&mut self, i: usize) {
        if i / 64 != self.word {
            self.lift();
            self.word = i / 64;
        }
        self.bits |= 1 << (i % 64);
    }

    fn lift(&mut self) {
        if let Some(word) = self.marks.0.get(self.word)
            && self.bits != 0
        {
            word.fetch_or(self.bits, Relaxed);
        }
        self.bits = 0;
    }
}

impl Drop for Pen<'_> {
    fn drop(&mut self) {
        self.lift();
    }
}

#[cfg(test)]
mod tests {
    use super::*;

    #[test]
    fn marks_stand_where_they_were_set() {
        let marks = Marks::new(200);
        let set = [0, 1, 63, 64, 130, 7, 199, 199];
        let mut pen = marks.pen();
        for &i in &set {
            pen.mark(i);
        }
        drop(pen);
        for i in 0..200 {
            assert_eq!(marks.is_marked(i), set.contains(&i), "{i}");
        }
        assert!(!marks.is_marked(1000));
    }
}
