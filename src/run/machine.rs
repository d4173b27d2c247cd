//! What memory the machine, the control group and the limits of this process allow, and the budget of a run that follows.

use std::path::{Path, PathBuf};

use crate::base::budget::{rounded_up, size};
use crate::base::error::{Error, Result};
use crate::base::par::{STACK_BYTES, default_threads};

/// What the program takes besides its budget, and what it takes a thread: the peak of resident memory stays within the sum.
pub const PROGRAM_BYTES: u64 = 32 << 20;
/// The part of a thread.
pub const THREAD_BYTES: u64 = 8 << 20;
/// Address space that the C library may set aside for the allocations of one thread.
const ARENA_BYTES: u64 = 64 << 20;
/// A budget below which no run is begun.
const LEAST: u64 = 8 << 20;
/// The budget where nothing tells what there is.
const UNKNOWN: u64 = 4 << 30;

/// Who limits memory.
#[derive(Debug, Clone, Copy, PartialEq, Eq)]
pub enum Bound {
    /// What is built in.
    Machine,
    /// A control group.
    Group,
    /// `ulimit -v`.
    Space,
    /// `ulimit -d`.
    Data,
}

impl Bound {
    fn name(self) -> &'static str {
        match self {
            Bound::Machine => "the machine's memory",
            Bound::Group => "the memory limit of the control group",
            Bound::Space => "the limit of address space (ulimit -v)",
            Bound::Data => "the limit of data (ulimit -d)",
        }
    }
}

/// What was found out.
#[derive(Debug, Clone, PartialEq, Eq, Default)]
pub struct Machine {
    /// Every limit that there is, in bytes.
    pub bounds: Vec<(Bound, u64)>,
    /// Address space that is taken already.
    pub mapped: u64,
    /// Writable memory that is taken already.
    pub data: u64,
}

/// A budget, and what it comes from.
#[derive(Debug, Clone, PartialEq, Eq)]
pub struct Share {
    /// Bytes that may be used besides what the program and its threads take.
    pub bytes: u64,
    /// In words.
    pub from: String,
}

impl Machine {
    /// Looks at this machine and process.
    pub fn here() -> Machine {
        Machine::below(Path::new("/"))
    }

    /// The same from the files below another root.
    pub fn below(root: &Path) -> Machine {
        let text = |path: &str| std::fs::read_to_string(root.join(path)).unwrap_or_default();
        let status = text("proc/self/status");
        let limits = text("proc/self/limits");
        let group = group_files(&text("proc/self/cgroup"), &text("proc/self/mountinfo"))
            .iter()
            .filter_map(|f| std::fs::read_to_string(root.join(f.strip_prefix("/").unwrap_or(f))).ok())
            .filter_map(|t| group_limit(&t))
            .min();
        let found = [
            (Bound::Machine, kib_of(&text("proc/meminfo"), "MemTotal:")),
            (Bound::Group, group),
            (Bound::Space, soft_limit(&limits, "Max address space")),
            (Bound::Data, soft_limit(&limits, "Max data size")),
        ];
        Machine {
            bounds: found.into_iter().filter_map(|(bound, bytes)| Some((bound, bytes?))).collect(),
            mapped: kib_of(&status, "VmSize:").unwrap_or(0),
            data: kib_of(&status, "VmData:").unwrap_or(0),
        }
    }

    /// The budget: what was asked for, or half of the smallest bound, less where the program would not find room beside it.
    /// `threads` = 0 stands for one per core.
    ///
    /// # Errors
    /// `Limit` when the program finds no room within a bound, alone or with the budget asked for.
    pub fn share(&self, asked: Option<u64>, threads: usize) -> Result<Share> {
        let threads = if threads == 0 { default_threads() } else { threads };
        let mut best: Option<Share> = None;
        for &(bound, limit) in &self.bounds {
            let own = self.own(bound, threads as u64);
            let room = limit.saturating_sub(own);
            // What is built in can be exceeded, at a price: that is for the user to say.
            if room < LEAST && !(bound == Bound::Machine && asked.is_some()) {
                return Err(Error::limit("cannot run within the memory there is")
                    .item(bound.name())
                    .expected(format!("at least {}, for the program with {}", rounded_up(own + LEAST), told(threads)))
                    .found(size(limit))
                    .hint(if threads > 1 { "raise the limit, or take fewer threads: --threads 1" } else { "raise the limit" }));
            }
            if let Some(asked) = asked.filter(|a| *a > room && bound != Bound::Machine) {
                return Err(Error::limit("cannot take the memory budget asked for")
                    .item(bound.name())
                    .expected(format!(
                        "{} or more, for --memory {} and the program with {}",
                        size(own.saturating_add(asked)),
                        size(asked),
                        told(threads)
                    ))
                    .found(size(limit))
                    .hint(format!("--memory {}MiB or less, or raise the limit", room >> 20)));
            }
            let half = limit / 2;
            let from = if half <= room {
                format!("half of {}, {}", bound.name(), size(limit))
            } else {
                format!("what {}, {}, leaves beside the program with {}", bound.name(), size(limit), told(threads))
            };
            let share = Share { bytes: half.min(room), from };
            if best.as_ref().is_none_or(|b| share.bytes < b.bytes) {
                best = Some(share);
            }
        }
        Ok(match asked {
            Some(bytes) => Share { bytes, from: "--memory".to_string() },
            None => best.unwrap_or_else(|| Share { bytes: UNKNOWN, from: "nothing tells what the machine has".to_string() }),
        })
    }

    /// What the program and its threads take of a bound, besides the budget. One thread more reads ahead.
    fn own(&self, bound: Bound, threads: u64) -> u64 {
        let stack = STACK_BYTES as u64;
        match bound {
            Bound::Machine | Bound::Group => PROGRAM_BYTES + threads * THREAD_BYTES,
            Bound::Space => self.mapped + PROGRAM_BYTES + (threads + 1) * (stack + ARENA_BYTES),
            Bound::Data => self.data + PROGRAM_BYTES + (threads + 1) * (stack + THREAD_BYTES),
        }
    }
}

fn told(threads: usize) -> String {
    if threads == 1 { "1 thread".to_string() } else { format!("{threads} threads") }
}

/// Peak of the resident memory of this process, where the system tells.
pub fn peak_memory() -> Option<u64> {
    kib_of(&std::fs::read_to_string("/proc/self/status").ok()?, "VmHWM:")
}

/// Bytes that this process has read from and written to files and the like, where the system tells.
pub fn transferred() -> Option<(u64, u64)> {
    let text = std::fs::read_to_string("/proc/self/io").ok()?;
    Some((number_of(&text, "rchar:")?, number_of(&text, "wchar:")?))
}

/// The number behind a name at the beginning of a line.
fn number_of(text: &str, name: &str) -> Option<u64> {
    text.lines().find_map(|l| l.strip_prefix(name))?.split_whitespace().next()?.parse().ok()
}

/// The same of a number of KiB, as `/proc/meminfo` and `/proc/self/status` have it, in bytes.
fn kib_of(text: &str, name: &str) -> Option<u64> {
    number_of(text, name)?.checked_mul(1024)
}

/// The soft limit of that name in `/proc/self/limits`; none where it is unlimited.
fn soft_limit(text: &str, name: &str) -> Option<u64> {
    number_of(text, name)
}

/// The limit in `memory.max` or `memory.limit_in_bytes`; none where it is unlimited, which the older kind says with a number near
/// the largest there is.
fn group_limit(text: &str) -> Option<u64> {
    text.trim().parse().ok().filter(|v| *v < 1 << 60)
}

/// The files that may limit the memory of this process: of its control group and all above it, of both versions.
/// `groups` is `/proc/self/cgroup`, `mounts` is `/proc/self/mountinfo`.
///
/// # References
/// Linux manual pages cgroups(7) and proc_pid_mountinfo(5).
fn group_files(groups: &str, mounts: &str) -> Vec<PathBuf> {
    let mut out = Vec::new();
    for line in groups.lines() {
        let mut parts = line.splitn(3, ':');
        let (Some(_), Some(controllers), Some(group)) = (parts.next(), parts.next(), parts.next()) else { continue };
        let newer = controllers.is_empty();
        if !newer && !controllers.split(',').any(|c| c == "memory") {
            continue;
        }
        let file = if newer { "memory.max" } else { "memory.limit_in_bytes" };
        for (root, point) in mounts.lines().filter_map(|m| mounted(m, newer)) {
            // Inside a container the group may be named from outside it, and what is mounted is that group.
            let inside = Path::new(group).strip_prefix(&root).or_else(|_| Path::new(group).strip_prefix("/")).unwrap_or(Path::new(""));
            out.extend(inside.ancestors().map(|a| point.join(a).join(file)));
        }
    }
    out
}

/// Root and mount point of a line of `mountinfo`, where it is a hierarchy of control groups of that version that has memory.
fn mounted(line: &str, newer: bool) -> Option<(PathBuf, PathBuf)> {
    let (before, behind) = line.split_once(" - ")?;
    let mut fields = before.split(' ').skip(3);
    let path = |t: &str| PathBuf::from(t.replace("\\040", " "));
    let (root, point) = (path(fields.next()?), path(fields.next()?));
    let mut kind = behind.split(' ');
    let right = match (kind.next()?, newer) {
        ("cgroup2", true) => true,
        ("cgroup", false) => kind.nth(1).is_some_and(|o| o.split(',').any(|c| c == "memory")),
        _ => false,
    };
    right.then_some((root, point))
}

#[cfg(test)]
mod tests {
    use super::*;

    const MIB: u64 = 1 << 20;
    // Lines in the form of the Linux manual pages proc_meminfo(5), proc_pid_limits(5), proc_pid_status(5).
    const MEMINFO: &str = "MemTotal:        8000000 kB\nMemFree:          500000 kB\n";
    const LIMITS: &str = "Limit                     Soft Limit           Hard Limit           Units     \n\
        Max data size             unlimited            unlimited            bytes     \n\
        Max address space         307200000            unlimited            bytes     \n";
    const STATUS: &str = "Name:\tropewalk\nVmPeak:\t   40000 kB\nVmSize:\t   38000 kB\nVmHWM:\t    9000 kB\nVmData:\t    1500 kB\n";

    #[test]
    fn numbers_are_found_by_name() {
        assert_eq!(kib_of(MEMINFO, "MemTotal:"), Some(8_000_000 * 1024));
        assert_eq!((kib_of(STATUS, "VmSize:"), kib_of(STATUS, "VmHWM:")), (Some(38_000 * 1024), Some(9000 * 1024)));
        assert_eq!((soft_limit(LIMITS, "Max address space"), soft_limit(LIMITS, "Max data size")), (Some(307_200_000), None));
        assert_eq!((kib_of("", "MemTotal:"), kib_of("MemTotal: much kB", "MemTotal:")), (None, None));
        assert_eq!([group_limit("max\n"), group_limit("9223372036854771712\n"), group_limit("1048576\n")], [None, None, Some(MIB)]);
    }

    #[test]
    fn control_groups_and_all_above_them() {
        let files = |groups: &str, mounts: &str| -> Vec<String> {
            group_files(groups, mounts).iter().map(|p| p.to_string_lossy().into_owned()).collect()
        };
        let newer = "35 24 0:30 / /sys/fs/cgroup rw,nosuid shared:9 - cgroup2 cgroup2 rw,nsdelegate\n";
        assert_eq!(
            files("0::/jobs/7\n", newer),
            ["/sys/fs/cgroup/jobs/7/memory.max", "/sys/fs/cgroup/jobs/memory.max", "/sys/fs/cgroup/memory.max"]
        );
        let older = "30 25 0:26 /box/a /sys/fs/cgroup/memory rw - cgroup cgroup rw,memory\n\
             31 25 0:27 / /sys/fs/cgroup/cpu rw shared:8 master:3 - cgroup cgroup rw,cpu\n";
        // The group is named from outside the container, whose own group is what is mounted.
        let groups = "4:memory:/box/a/b\n3:cpu,cpuacct:/x\n0::/\n";
        assert_eq!(files(groups, older), ["/sys/fs/cgroup/memory/b/memory.limit_in_bytes", "/sys/fs/cgroup/memory/memory.limit_in_bytes"]);
        // A hierarchy of the newer version beside, without a limit of memory.
        assert_eq!(files(groups, &format!("{older}{newer}")).last().map(String::as_str), Some("/sys/fs/cgroup/memory.max"));
        assert!(files("4:cpu:/a\n", older).is_empty() && files("", newer).is_empty() && files("nonsense", "nonsense - x").is_empty());
    }

    #[test]
    fn a_whole_machine_is_looked_at() {
        let root = tempfile::tempdir().unwrap();
        let put = |path: &str, text: &str| {
            let path = root.path().join(path);
            std::fs::create_dir_all(path.parent().unwrap()).unwrap();
            std::fs::write(path, text).unwrap();
        };
        assert_eq!(Machine::below(root.path()), Machine::default());
        put("proc/meminfo", MEMINFO);
        put("proc/self/limits", LIMITS);
        put("proc/self/status", STATUS);
        put("proc/self/cgroup", "0::/jobs/7\n");
        put("proc/self/mountinfo", "35 24 0:30 / /sys/fs/cgroup rw - cgroup2 cgroup2 rw\n");
        put("sys/fs/cgroup/jobs/7/memory.max", "max\n");
        put("sys/fs/cgroup/jobs/memory.max", "2147483648\n");
        let found = Machine::below(root.path());
        let bounds = vec![(Bound::Machine, 8_000_000 * 1024), (Bound::Group, 2 << 30), (Bound::Space, 307_200_000)];
        assert_eq!(found, Machine { bounds, mapped: 38_000 * 1024, data: 1500 * 1024 });
    }

    #[test]
    fn half_of_the_smallest_or_what_is_asked_for() {
        let machine = |bounds: &[(Bound, u64)]| Machine { bounds: bounds.to_vec(), mapped: 40 * MIB, data: 2 * MIB };
        let both = machine(&[(Bound::Machine, 8192 * MIB), (Bound::Group, 2048 * MIB)]);
        let share = both.share(None, 2).unwrap();
        assert_eq!((share.bytes, share.from.as_str()), (1024 * MIB, "half of the memory limit of the control group, 2.0 GiB"));
        assert_eq!(both.share(Some(512 * MIB), 2).unwrap(), Share { bytes: 512 * MIB, from: "--memory".into() });
        // 2048 - 32 - 2 * 8.
        assert_eq!(both.share(Some(2000 * MIB), 2).unwrap().bytes, 2000 * MIB);
        let told = both.share(Some(2001 * MIB), 2).unwrap_err().to_string();
        assert!(told.ends_with("found 2.0 GiB; hint: --memory 2000MiB or less, or raise the limit"), "{told}");
        // The machine's own memory may be exceeded by who says so.
        assert_eq!(machine(&[(Bound::Machine, 64 * MIB)]).share(Some(1 << 40), 1).unwrap().bytes, 1 << 40);
        assert_eq!(machine(&[]).share(None, 1).unwrap().bytes, UNKNOWN);
    }

    #[test]
    fn little_memory_leaves_less_than_half_or_is_refused() {
        let machine = |bound: Bound, limit: u64| Machine { bounds: vec![(bound, limit * MIB)], mapped: 40 * MIB, data: 2 * MIB };
        // 40 mapped, 32 of the program, 3 threads of 2 and 64.
        let share = machine(Bound::Space, 300).share(None, 2).unwrap();
        assert_eq!(share.bytes, (300 - 40 - 32 - 3 * 66) * MIB);
        assert_eq!(share.from, "what the limit of address space (ulimit -v), 300.0 MiB, leaves beside the program with 2 threads");
        let told = machine(Bound::Space, 277).share(None, 2).unwrap_err().to_string();
        assert_eq!(
            told,
            "cannot run within the memory there is: the limit of address space (ulimit -v): expected at least 278MiB, for the program with \
             2 threads, found 277.0 MiB; hint: raise the limit, or take fewer threads: --threads 1"
        );
        assert!(machine(Bound::Space, 278).share(None, 2).is_ok());
        // 2 taken, 32, 2 threads of 2 and 8; 32 and 8.
        assert_eq!(machine(Bound::Data, 64).share(None, 1).unwrap().bytes, (64 - 54) * MIB);
        assert_eq!(machine(Bound::Group, 60).share(None, 1).unwrap().bytes, 20 * MIB);
        assert!(machine(Bound::Group, 47).share(None, 1).is_err() && machine(Bound::Group, 48).share(None, 1).is_ok());
    }
}
