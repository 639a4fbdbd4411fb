//! What a file may unfold to: a few bytes can ask for gigabytes, by DEFLATE and by repeating a list.

use std::sync::atomic::{AtomicU64, Ordering};

use super::super::error::Parsed;
use super::cursor::Cursor;

/// Inflated bytes that any file may have, and more for each of its own bytes: dense arrays deflate to about 1/50.
const INFLATED: u64 = 64 << 20;
const INFLATED_PER_BYTE: u64 = 250;

/// Points that any file may take again from a list or a circle, and more for each of its own bytes.
const COPIED: u64 = 1 << 24;
const COPIED_PER_BYTE: u64 = 64;

/// Shared by the threads that read one file. Whether it is overdrawn does not depend on their order.
#[derive(Debug)]
pub(super) struct Budget {
    inflated: AtomicU64,
    copied: AtomicU64,
}

impl Budget {
    pub(super) fn for_file_of(bytes: usize) -> Self {
        let bytes = bytes as u64;
        Self {
            inflated: AtomicU64::new(INFLATED + bytes.saturating_mul(INFLATED_PER_BYTE)),
            copied: AtomicU64::new(COPIED + bytes.saturating_mul(COPIED_PER_BYTE)),
        }
    }

    /// Asks for room for inflated bytes.
    pub(super) fn inflate(&self, bytes: u64, cur: &Cursor<'_>) -> Parsed<()> {
        let found = "CBLOCKs that inflate to too many bytes";
        take(&self.inflated, bytes).ok_or_else(|| {
            let expected =
                format!("at most {INFLATED} and {INFLATED_PER_BYTE} for each byte of the file");
            cur.fault(0, found, expected)
        })
    }

    /// Asks for room for points that are not in the file one by one.
    pub(super) fn copy(&self, points: usize, cur: &Cursor<'_>) -> Parsed<()> {
        let found = "lists and circles that unfold to too many points";
        take(&self.copied, points as u64).ok_or_else(|| {
            let expected =
                format!("at most {COPIED} and {COPIED_PER_BYTE} for each byte of the file");
            cur.fault(0, found, expected)
        })
    }
}

fn take(left: &AtomicU64, amount: u64) -> Option<()> {
    left.fetch_update(Ordering::Relaxed, Ordering::Relaxed, |l| {
        l.checked_sub(amount)
    })
    .ok()
    .map(|_| ())
}
