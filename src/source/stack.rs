//! Threads whose stack holds every recursion that the nesting limits of [`super::chunks`] let through. The parser needs up
//! to 100 kB of stack per nesting level of a generate block; converting, elaborating and dropping trees recurse too, so
//! the whole pipeline runs on these threads. The memory is only reserved; a page costs something once it is touched.

use rayon::{ThreadPool, ThreadPoolBuilder};

/// Stack sizes to try, in MiB: a system with a tight limit on address space refuses the large ones.
const STACK_MIB: [usize; 3] = [1024, 512, 256];

/// Runs `work` on a pool of `threads` threads (0 = one per core) with very large stacks.
///
/// # Errors
/// When the system gives no such threads at all.
pub fn on_big_stacks<R: Send>(threads: usize, work: impl FnOnce() -> R + Send) -> Result<R, String> {
    let mut problem = String::new();
    for mib in STACK_MIB {
        match pool(threads, mib) {
            Ok(pool) => return Ok(pool.install(work)),
            Err(error) => problem = error.to_string(),
        }
    }
    Err(format!("no threads with a stack of {} MiB: {problem}", STACK_MIB[STACK_MIB.len() - 1]))
}

fn pool(threads: usize, mib: usize) -> Result<ThreadPool, rayon::ThreadPoolBuildError> {
    ThreadPoolBuilder::new().num_threads(threads).stack_size(mib << 20).build()
}
