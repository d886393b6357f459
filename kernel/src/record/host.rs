//! What a run happened on: system, processor, memory. No names of machines or people.

use std::collections::BTreeMap;
use std::ffi::CStr;
use std::fs;

/// Facts about this machine, by name.
pub fn facts() -> BTreeMap<String, String> {
    let mut facts = BTreeMap::new();
    let mut put = |name: &str, value: Option<String>| {
        if let Some(value) = value.map(|value| value.trim().to_owned()).filter(|v| !v.is_empty()) {
            facts.insert(name.to_owned(), value);
        }
    };
    put("system", system());
    put("kernel", kernel());
    put("architecture", Some(std::env::consts::ARCH.to_owned()));
    put("processor", line_of("/proc/cpuinfo", "model name"));
    let threads = std::thread::available_parallelism();
    put("threads", threads.ok().map(|threads| threads.to_string()));
    put("memory", line_of("/proc/meminfo", "MemTotal"));
    let locale = ["LC_ALL", "LC_NUMERIC", "LANG"].iter().find_map(|name| std::env::var(name).ok());
    put("locale", locale);
    put("RAYON_NUM_THREADS", std::env::var("RAYON_NUM_THREADS").ok());
    facts
}

fn system() -> Option<String> {
    let text = fs::read_to_string("/etc/os-release").ok()?;
    let line = text.lines().find_map(|line| line.strip_prefix("PRETTY_NAME="))?;
    Some(line.trim_matches('"').to_owned())
}

fn kernel() -> Option<String> {
    // SAFETY: all bytes zero is a valid `utsname`, and the call fills it with C strings.
    unsafe {
        let mut name: libc::utsname = std::mem::zeroed();
        if libc::uname(&raw mut name) != 0 {
            return None;
        }
        let text =
            |field: &[libc::c_char]| CStr::from_ptr(field.as_ptr()).to_string_lossy().into_owned();
        Some(format!("{} {}", text(&name.sysname), text(&name.release)))
    }
}

/// The value of the first line that begins with a name.
fn line_of(path: &str, name: &str) -> Option<String> {
    let text = fs::read_to_string(path).ok()?;
    let line = text.lines().find(|line| line.starts_with(name))?;
    line.split_once(':').map(|(_, value)| value.to_owned())
}
