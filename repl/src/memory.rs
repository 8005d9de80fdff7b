//! The memory limit: a thread looks at what the program holds and stops the calculation that takes too much.

use std::sync::Arc;
use std::sync::atomic::{AtomicBool, Ordering};
use std::time::Duration;

use lysocline_engine::script::Stop;

/// How often it looks. A calculation can fill some hundred megabytes meanwhile.
const PERIOD: Duration = Duration::from_millis(20);

/// Stops the calculation above `limit` megabytes, and ends the program above half as much again. Where the system does not
/// tell what a program holds, nothing is watched. It ends with `over`.
pub fn watch(limit: usize, stop: &Stop, over: &Arc<AtomicBool>) {
    if held().is_none() {
        return;
    }
    let (stop, over) = (stop.clone(), Arc::clone(over));
    let watcher = std::thread::Builder::new().name("memory".to_owned());
    let _ = watcher.spawn(move || {
        while !over.load(Ordering::Relaxed) {
            std::thread::sleep(PERIOD);
            let held = held().unwrap_or(0);
            if held > limit + limit / 2 {
                eprintln!(
                    "error: ended: the calculation holds {held} MB, more than `--memory-limit {limit}` allows"
                );
                std::process::exit(1);
            }
            if held > limit {
                stop.fill_memory();
            }
        }
    });
}

/// Megabytes of memory the program holds now.
fn held() -> Option<usize> {
    let status = std::fs::read_to_string("/proc/self/status").ok()?;
    let line = status.lines().find_map(|line| line.strip_prefix("VmRSS:"))?;
    let kilobytes: usize = line.trim().strip_suffix("kB")?.trim().parse().ok()?;
    Some(kilobytes / 1024)
}
