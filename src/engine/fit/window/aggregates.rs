//! How a window's aggregates are put together from its segments.

use super::Window;

impl Window {
    /// Builds all aggregates from the segments: every closed segment goes to the front.
    pub(in crate::fit) fn rebuild(&mut self) {
        self.spare.keep_all(&mut self.front);
        self.back.clear();
        if let Some(newest) = self.closed.back() {
            // The newest segment's level: then no suffix counts from one that only older ones had.
            self.front_level = newest.level;
            self.fill_front(self.closed.len());
        }
        self.put_total_together();
    }

    /// The oldest so many closed segments go to the front, which is empty.
    pub(super) fn fill_front(&mut self, count: usize) {
        for place in (0..count).rev() {
            let mut suffix = self.spare.take(self.columns.count());
            if let Some(shorter) = self.front.last() {
                suffix.copy_from(shorter);
            }
            let segment = &self.closed[place];
            suffix.merge_level(&segment.factor, self.front_level - segment.level);
            self.front.push(suffix);
        }
    }

    /// Total = front's top, back, open segment.
    pub(super) fn put_total_together(&mut self) {
        let open_level = self.open.as_ref().map(|open| open.level);
        let back_level = (self.back.rows() > 0).then_some(self.back_level);
        self.total_level = open_level.or(back_level).unwrap_or(self.front_level);
        if let Some(top) = self.front.last() {
            self.total.copy_from(top);
            self.total.move_level(self.total_level - self.front_level);
        } else {
            self.total.clear();
        }
        self.total
            .merge_level(&self.back, self.total_level - self.back_level);
        if let Some(open) = &self.open {
            self.total
                .merge_level(&open.factor, self.total_level - open.level);
        }
    }
}
