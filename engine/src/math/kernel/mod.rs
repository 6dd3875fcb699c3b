//! Kernels written for one kind of processor, each beside the plain scalar twin that tests compare it to. The only place
//! with `unsafe`.

mod sift;

pub use sift::{Kept, Sieve, chunk_for};
