//! What a run may use.

/// What a run may use. Nothing here changes a byte of any table.
#[derive(Clone, Copy, Debug, PartialEq, Eq)]
pub struct Limits {
    /// Worker threads, at least 1. The caller's rayon pool should have as many.
    pub threads: usize,
    /// Bytes for the values a pass keeps and the blocks in work; not the whole process.
    pub memory: u64,
}

/// Memory budget where the user states none: 1 GiB.
pub const DEFAULT_MEMORY: u64 = 1 << 30;
