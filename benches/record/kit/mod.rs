//! What the benchmarks of the record share.

#![allow(dead_code, reason = "each benchmark uses its own part")]

pub(crate) mod bare;
pub(crate) mod feeder;

use std::process::ExitCode;

/// Seconds of the processor that a process or thread has used, from its `stat` file in `/proc`.
pub(crate) fn cpu_seconds(stat: &str) -> f64 {
    let text = std::fs::read_to_string(stat).unwrap();
    // After the name in brackets: fields 14 and 15, user and system time in ticks of 10 ms
    // (proc_pid_stat(5)).
    let rest = text.rsplit(')').next().unwrap();
    let field = |number: usize| -> f64 {
        let text = rest.split_whitespace().nth(number - 3).unwrap();
        text.parse().unwrap()
    };
    0.01 * (field(14) + field(15))
}

/// Bytes that a process has sent to the disk so far (`write_bytes` in `proc_pid_io(5)`).
pub(crate) fn written_bytes(process: &str) -> u64 {
    let text = std::fs::read_to_string(format!("/proc/{process}/io")).unwrap();
    let line = text.lines().find(|line| line.starts_with("write_bytes"));
    line.unwrap().split(' ').nth(1).unwrap().parse().unwrap()
}

/// Processes that want a processor, on average over the last minute.
pub(crate) fn machine_load() -> String {
    let text = std::fs::read_to_string("/proc/loadavg").unwrap();
    text.split(' ').next().unwrap_or_default().to_owned()
}

/// A number from the environment.
pub(crate) fn number(name: &str, usual: u64) -> u64 {
    std::env::var(name).map_or(usual, |text| text.parse().expect("a number"))
}

/// Says whether a target is met.
pub(crate) fn judge(what: &str, met: bool, all: &mut bool) {
    println!("{} {what}", if met { "met:   " } else { "MISSED:" });
    *all &= met;
}

/// 1 if a target is missed.
pub(crate) fn exit(met: bool) -> ExitCode {
    if met {
        ExitCode::SUCCESS
    } else {
        ExitCode::FAILURE
    }
}
