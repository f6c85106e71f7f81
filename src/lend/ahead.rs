//! Asking for memory before it is needed, a little at a time, so that it arrives while something is computed.

use super::View;
use crate::team::memory::fetch_address;

/// Bytes that a processor fetches at once.
const LINE: usize = 64;
/// Stretches of memory that may wait; more are left to the processor's own guesses.
const MOST: usize = 16;

/// A stretch of memory: the next address, and how many more follow at which step.
#[derive(Clone, Copy, Default)]
struct Stretch {
    next: usize,
    step: usize,
    left: usize,
}

/// Memory that will be read soon.
#[derive(Default)]
pub struct Ahead {
    stretches: [Stretch; MOST],
    count: usize,
    current: usize,
}

impl Ahead {
    /// Forgets what has not been asked for.
    pub fn clear(&mut self) {
        (self.count, self.current) = (0, 0);
    }

    /// Puts down the elements of a view from `start` on, as far as there are any.
    pub fn add(&mut self, view: &View, start: usize, length: usize) {
        let length = length.min(view.count().saturating_sub(start));
        view.each_stretch(start, length, |low, high, stride| {
            if let Some(stretch) = self.stretches.get_mut(self.count) {
                // Elements larger than a line are fetched where they begin.
                let step = LINE.max(stride / LINE * LINE);
                *stretch = Stretch {
                    next: low,
                    step,
                    left: (high - low) / step + 1,
                };
                self.count += 1;
            }
        });
    }

    /// Asks for a few more lines.
    #[inline]
    pub fn some(&mut self) {
        /// A processor has about so many requests under way.
        const SOME: usize = 8;
        let mut wanted = SOME;
        while let Some(stretch) = self.stretches[..self.count].get_mut(self.current) {
            let now = wanted.min(stretch.left);
            for _ in 0..now {
                fetch_address(stretch.next);
                stretch.next = stretch.next.wrapping_add(stretch.step);
            }
            stretch.left -= now;
            wanted -= now;
            if stretch.left > 0 {
                return;
            }
            self.current += 1;
        }
    }
}
