//! Processor time of this thread, so that other work on the machine disturbs a figure less.

/// Seconds this thread has spent on a processor, from the kernel's scheduler statistics; `None` where
/// the kernel tells none.
pub fn seconds() -> Option<f64> {
    let text = std::fs::read_to_string("/proc/thread-self/schedstat").ok()?;
    let nanoseconds: f64 = text.split_whitespace().next()?.parse().ok()?;
    Some(nanoseconds * 1e-9)
}
