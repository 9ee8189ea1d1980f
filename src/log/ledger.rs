//! Every drop and repair, counted without limit and listed up to one.

use super::Repair;

/// Entries of one kind listed before the rest are summed up; the counts have no such limit.
pub const LISTED_AT_MOST: u64 = 200;

/// Collects what was done to the records.
#[derive(Debug, Default)]
pub struct Ledger {
    repairs: Vec<Repair>,
    pub dropped: u64,
    /// Records in which a value (reading or stamp) was replaced.
    pub repaired: u64,
    reordered: u64,
}

impl Ledger {
    /// A record that was dropped; the reason is only put into words while the list has room.
    pub fn dropped(&mut self, line: u64, reason: impl FnOnce() -> String) {
        self.dropped += 1;
        if self.dropped <= LISTED_AT_MOST {
            self.entry(Some(line), "dropped", reason());
        }
    }

    /// A record whose stamp was replaced.
    pub fn stamp_replaced(&mut self, line: u64, message: String) {
        self.repaired += 1;
        self.entry(Some(line), "time", message);
    }

    /// A record that stood in the wrong place and was moved to its own.
    pub fn reordered(&mut self, line: u64, reason: impl FnOnce() -> String) {
        self.reordered += 1;
        if self.reordered <= LISTED_AT_MOST {
            self.entry(Some(line), "order", reason());
        }
    }

    /// Anything that concerns the log as a whole, or a place in it.
    pub fn entry(&mut self, line: Option<u64>, kind: &str, message: String) {
        self.repairs.push(Repair { line, column: None, kind: kind.to_owned(), message });
    }

    /// The list, in order of lines, with a summary of what it leaves out.
    pub fn into_repairs(mut self) -> Vec<Repair> {
        self.repairs.sort_by_key(|repair| repair.line.unwrap_or(0));
        for (kind, count) in [("dropped", self.dropped), ("order", self.reordered)] {
            if count > LISTED_AT_MOST {
                let rest = count - LISTED_AT_MOST;
                self.entry(None, kind, format!("{rest} more records {kind} than listed, {count} in all"));
            }
        }
        self.repairs
    }
}

#[cfg(test)]
mod tests {
    use super::*;

    #[test]
    fn the_list_is_capped_and_the_count_is_not() {
        let mut ledger = Ledger::default();
        for line in 0..1000 {
            ledger.dropped(line, || "x".to_owned());
        }
        assert_eq!(ledger.dropped, 1000);
        let list = ledger.into_repairs();
        assert_eq!(list.len() as u64, LISTED_AT_MOST + 1);
        assert!(list.last().unwrap().message.contains("800 more"));
    }
}
