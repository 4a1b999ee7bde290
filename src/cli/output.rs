//! Where data and talk go: data to a file or stdout, talk to stderr.

use anyhow::Context;
use std::fs::File;
use std::io::{self, BufWriter, IsTerminal, Write};
use std::path::{Path, PathBuf};

/// Data goes to a file by a temporary name and a rename, or to stdout.
pub(super) enum Output {
    Stdout(BufWriter<io::StdoutLock<'static>>),
    File { writer: BufWriter<File>, partial: PathBuf, path: PathBuf },
}

impl Output {
    pub(super) fn open(path: Option<&Path>) -> anyhow::Result<Self> {
        Ok(match path {
            None => Self::Stdout(BufWriter::new(io::stdout().lock())),
            Some(path) if path.as_os_str() == "-" => Self::Stdout(BufWriter::new(io::stdout().lock())),
            Some(path) => {
                let mut name = path.as_os_str().to_owned();
                name.push(".partial");
                let partial = PathBuf::from(name);
                let file =
                    File::create(&partial).with_context(|| format!("cannot write {}", partial.display()))?;
                Self::File { writer: BufWriter::new(file), partial, path: path.to_owned() }
            }
        })
    }

    pub(super) fn write(&mut self, text: &str) -> anyhow::Result<()> {
        match self {
            Self::Stdout(writer) => writer.write_all(text.as_bytes())?,
            Self::File { writer, path, .. } => {
                writer
                    .write_all(text.as_bytes())
                    .with_context(|| format!("cannot write {}", path.display()))?;
            }
        }
        Ok(())
    }

    pub(super) fn close(self) -> anyhow::Result<()> {
        match self {
            Self::Stdout(mut writer) => writer.flush()?,
            Self::File { mut writer, partial, path } => {
                writer.flush().with_context(|| format!("cannot write {}", path.display()))?;
                std::fs::rename(&partial, &path)
                    .with_context(|| format!("cannot write {}", path.display()))?;
            }
        }
        Ok(())
    }
}

/// The width of the terminal on stdout, if it is one.
pub(super) fn terminal_width() -> Option<u16> {
    io::stdout().is_terminal().then(|| console_width().unwrap_or(100))
}

fn console_width() -> Option<u16> {
    std::env::var("COLUMNS").ok().and_then(|text| text.parse().ok())
}

/// One line on stderr.
pub(super) fn talk(line: &str) {
    let _ = writeln!(io::stderr().lock(), "{line}");
}

/// Whether an error only says that the reader of a pipe has gone.
pub(super) fn is_broken_pipe(error: &anyhow::Error) -> bool {
    error.chain().any(|cause| {
        cause.downcast_ref::<io::Error>().is_some_and(|cause| cause.kind() == io::ErrorKind::BrokenPipe)
    })
}
