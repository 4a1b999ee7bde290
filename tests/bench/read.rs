//! Timings of the reader on given files, as one JSON object; `read.py` beside this file compares them with a peer.
//!
//!     cargo bench --bench read -- PATH... [--repeats N]
//!     cargo bench --bench read -- FILE --once parse|read
//!
//! The first form loads the files (of a folder, all that end in `.cif`) and times passes over all of them in memory:
//! `cif::parse` alone, and `cif::read_bytes`. The second handles one file once, loading included, and tells the highest
//! memory use of the process.
#![allow(clippy::print_stdout, reason = "a report to the terminal")]

use cosetta::cif;
use serde_json::json;
use std::path::{Path, PathBuf};
use std::process::ExitCode;
use std::time::Instant;

const USAGE: &str = "usage: read PATH... [--repeats N] [--once parse|read]";

fn main() -> ExitCode {
    let Some(request) = Request::parse(std::env::args().skip(1)) else {
        println!("{USAGE}");
        return ExitCode::from(2);
    };
    let report = match &request.once {
        Some(step) => time_once(&request.paths[0], *step),
        None => time_passes(&request.paths, request.repeats),
    };
    match report {
        Ok(report) => {
            println!("{report}");
            ExitCode::SUCCESS
        }
        Err(error) => {
            println!("{error}");
            ExitCode::FAILURE
        }
    }
}

struct Request {
    paths: Vec<PathBuf>,
    repeats: usize,
    once: Option<Step>,
}

#[derive(Clone, Copy)]
enum Step {
    Parse,
    Read,
}

impl Step {
    /// Handles a file; the result is a count that depends on it, so that no work can be left out.
    fn run(self, bytes: &[u8]) -> usize {
        match self {
            Self::Parse => cif::parse(bytes).0.blocks().len(),
            Self::Read => {
                let (document, _) = cif::parse(bytes);
                document.blocks().filter(|block| cif::read_block(block).unit.is_ok()).count()
            }
        }
    }
}

impl Request {
    fn parse(mut words: impl Iterator<Item = String>) -> Option<Self> {
        let mut request = Self { paths: Vec::new(), repeats: 5, once: None };
        while let Some(word) = words.next() {
            match word.as_str() {
                // Added by cargo.
                "--bench" => {}
                "--repeats" => request.repeats = words.next()?.parse().ok().filter(|&repeats| repeats > 0)?,
                "--once" => {
                    request.once = Some(match words.next()?.as_str() {
                        "parse" => Step::Parse,
                        "read" => Step::Read,
                        _ => return None,
                    });
                }
                _ => request.paths.push(word.into()),
            }
        }
        (!request.paths.is_empty()).then_some(request)
    }
}

/// Seconds of each pass over all files, which are in memory before the first.
fn time_passes(paths: &[PathBuf], repeats: usize) -> std::io::Result<serde_json::Value> {
    let files = load(paths)?;
    let time = |step: Step| {
        let start = Instant::now();
        let count: usize = files.iter().map(|bytes| step.run(std::hint::black_box(bytes))).sum();
        (start.elapsed().as_secs_f64(), std::hint::black_box(count))
    };
    let (mut parse, mut read) = (Vec::new(), Vec::new());
    let (mut items, mut structures) = (0, 0);
    for _ in 0..repeats {
        let (seconds, count) = time(Step::Parse);
        parse.push(seconds);
        items = count;
        let (seconds, count) = time(Step::Read);
        read.push(seconds);
        structures = count;
    }
    let bytes: usize = files.iter().map(Vec::len).sum();
    Ok(json!({
        "files": files.len(), "bytes": bytes, "items": items, "structures": structures, "parse": parse, "read": read,
    }))
}

fn load(paths: &[PathBuf]) -> std::io::Result<Vec<Vec<u8>>> {
    let mut names = Vec::new();
    for path in paths {
        if path.is_dir() {
            let entries = walkdir::WalkDir::new(path).sort_by_file_name().into_iter().flatten();
            names.extend(entries.map(walkdir::DirEntry::into_path).filter(|path| is_cif(path)));
        } else {
            names.push(path.clone());
        }
    }
    names.iter().map(std::fs::read).collect()
}

fn is_cif(path: &Path) -> bool {
    path.extension().is_some_and(|extension| extension.eq_ignore_ascii_case("cif"))
}

/// Seconds and memory (in bytes; `None` where the system does not tell) to load and handle one file.
fn time_once(path: &Path, step: Step) -> std::io::Result<serde_json::Value> {
    let start = Instant::now();
    let bytes = std::fs::read(path)?;
    let count = step.run(&bytes);
    let seconds = start.elapsed().as_secs_f64();
    Ok(json!({
        "bytes": bytes.len(), "seconds": seconds, "count": count, "peak": peak_memory(),
    }))
}

/// The high-water mark of the resident memory of this process, in bytes.
fn peak_memory() -> Option<u64> {
    let status = std::fs::read_to_string("/proc/self/status").ok()?;
    let line = status.lines().find_map(|line| line.strip_prefix("VmHWM:"))?;
    line.trim().strip_suffix("kB")?.trim().parse::<u64>().ok().map(|kilobytes| kilobytes * 1024)
}
