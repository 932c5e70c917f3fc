//! Half-open spans of time and sets of them.

use super::Utc;

/// The half-open span `start ≤ t < end`. Never inverted; empty when both are equal.
#[derive(Clone, Copy, Debug, PartialEq, Eq, Hash)]
pub struct Span {
    /// First instant inside.
    pub start: Utc,
    /// First instant after.
    pub end: Utc,
}

impl Span {
    /// The span between two instants; empty at `start` when `end` comes before it.
    pub fn new(start: Utc, end: Utc) -> Self {
        Span {
            start,
            end: end.max(start),
        }
    }

    /// Length in milliseconds.
    pub fn length_ms(&self) -> i64 {
        self.end - self.start
    }

    /// Holds no instant.
    pub fn is_empty(&self) -> bool {
        self.start == self.end
    }

    /// Whether the instant lies inside.
    pub fn contains(&self, at: Utc) -> bool {
        self.start <= at && at < self.end
    }

    /// The part common to both; empty when there is none.
    pub fn intersect(&self, other: &Span) -> Span {
        Span::new(self.start.max(other.start), self.end.min(other.end))
    }
}

/// A set of instants as sorted, disjoint, non-touching, non-empty spans.
#[derive(Clone, Debug, PartialEq, Eq, Default)]
pub struct SpanSet(Vec<Span>);

impl SpanSet {
    /// The union of the spans given, in any order.
    pub fn from_spans(spans: impl IntoIterator<Item = Span>) -> Self {
        let mut sorted: Vec<Span> = spans.into_iter().filter(|s| !s.is_empty()).collect();
        sorted.sort_by_key(|s| s.start);
        let mut merged: Vec<Span> = Vec::with_capacity(sorted.len());
        for span in sorted {
            match merged.last_mut() {
                Some(last) if span.start <= last.end => last.end = last.end.max(span.end),
                _ => merged.push(span),
            }
        }
        SpanSet(merged)
    }

    /// The spans in order.
    pub fn spans(&self) -> &[Span] {
        &self.0
    }

    /// Total length in milliseconds.
    pub fn total_ms(&self) -> i64 {
        self.0.iter().map(Span::length_ms).sum()
    }

    /// Whether the instant lies in the set.
    pub fn contains(&self, at: Utc) -> bool {
        let after = self.0.partition_point(|s| s.start <= at);
        after > 0 && self.0[after - 1].contains(at)
    }

    /// Instants in either set.
    pub fn union(&self, other: &SpanSet) -> SpanSet {
        SpanSet::from_spans(self.0.iter().chain(&other.0).copied())
    }

    /// Instants in both sets.
    pub fn intersect(&self, other: &SpanSet) -> SpanSet {
        let pairs = self
            .0
            .iter()
            .flat_map(|a| other.0.iter().map(|b| a.intersect(b)));
        SpanSet::from_spans(pairs)
    }

    /// Instants in this set and not in the other.
    pub fn subtract(&self, other: &SpanSet) -> SpanSet {
        let mut left = Vec::new();
        for span in &self.0 {
            let mut from = span.start;
            for hole in other
                .0
                .iter()
                .filter(|h| h.end > span.start && h.start < span.end)
            {
                left.push(Span::new(from, hole.start.max(from)));
                from = from.max(hole.end);
            }
            left.push(Span::new(from.min(span.end), span.end));
        }
        SpanSet::from_spans(left)
    }
}

impl From<Span> for SpanSet {
    fn from(span: Span) -> Self {
        SpanSet::from_spans([span])
    }
}

#[cfg(test)]
mod tests {
    use super::*;
    use proptest::prelude::*;

    fn span(start: i64, end: i64) -> Span {
        Span::new(Utc::from_unix_ms(start), Utc::from_unix_ms(end))
    }

    fn any_set() -> impl Strategy<Value = SpanSet> {
        proptest::collection::vec((0i64..60, 0i64..20), 0..8)
            .prop_map(|v| SpanSet::from_spans(v.into_iter().map(|(a, l)| span(a, a + l))))
    }

    proptest! {
        #[test]
        fn set_operations_agree_with_membership(a in any_set(), b in any_set()) {
            let (union, common, left) = (a.union(&b), a.intersect(&b), a.subtract(&b));
            for ms in -1..90 {
                let at = Utc::from_unix_ms(ms);
                let (ina, inb) = (a.contains(at), b.contains(at));
                prop_assert_eq!(union.contains(at), ina || inb);
                prop_assert_eq!(common.contains(at), ina && inb);
                prop_assert_eq!(left.contains(at), ina && !inb);
            }
            prop_assert_eq!(common.total_ms() + left.total_ms(), a.total_ms());
        }
    }
}
