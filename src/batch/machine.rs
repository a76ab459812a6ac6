//! What the machine has.

/// The memory this process can have at most, bytes: the machine's, or less where a limit is set for its
/// group of processes. Counts memory that others use now, so the answer does not change from run to run.
#[must_use]
pub fn machine_memory_bytes() -> u64 {
    let mut system = sysinfo::System::new();
    system.refresh_memory();
    let total = system.total_memory();
    match system.cgroup_limits() {
        Some(limits) if limits.total_memory > 0 => total.min(limits.total_memory),
        _ => total,
    }
}

#[cfg(test)]
mod tests {
    #[test]
    fn the_machine_has_more_than_64_mb_and_less_than_a_petabyte() {
        let bytes = super::machine_memory_bytes();
        assert!((64 << 20..1 << 50).contains(&bytes), "{bytes}");
    }
}
