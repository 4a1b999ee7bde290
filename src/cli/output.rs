//! Where data and talk go: data to a file or stdout, talk to stderr.

use anyhow::{Context, bail};
use std::borrow::Cow;
use std::fs::{self, File, OpenOptions, Permissions};
use std::io::{self, BufWriter, IsTerminal, Write};
use std::path::{Path, PathBuf};
use tempfile::NamedTempFile;

/// Data goes to a file by a temporary name and a rename, to something else than a file as it comes, or to stdout.
pub(super) enum Output {
    Stdout(BufWriter<io::StdoutLock<'static>>),
    File {
        writer: BufWriter<NamedTempFile>,
        path: PathBuf,
    },
    /// A device or a pipe.
    Other {
        writer: BufWriter<File>,
        path: PathBuf,
    },
}

impl Output {
    /// Opens the output. A link is followed, and no input is written over.
    pub(super) fn open(path: Option<&Path>, inputs: &[PathBuf]) -> anyhow::Result<Self> {
        let Some(path) = path.filter(|path| path.as_os_str() != "-") else {
            return Ok(Self::Stdout(BufWriter::new(io::stdout().lock())));
        };
        let name = || format!("cannot write {}", path.display());
        let Ok(known) = fs::metadata(path) else {
            return Ok(Self::File { writer: beside(path, None).with_context(name)?, path: path.to_owned() });
        };
        if known.is_dir() {
            bail!("cannot write {}: it is a folder", path.display());
        }
        if !known.is_file() {
            let file = OpenOptions::new().write(true).open(path).with_context(name)?;
            return Ok(Self::Other { writer: BufWriter::new(file), path: path.to_owned() });
        }
        let target = fs::canonicalize(path).with_context(name)?;
        if inputs.iter().any(|input| fs::canonicalize(input).is_ok_and(|input| input == target)) {
            bail!("cannot write {}: it is also an input", path.display());
        }
        Ok(Self::File {
            writer: beside(&target, Some(known.permissions())).with_context(name)?,
            path: target,
        })
    }

    pub(super) fn write(&mut self, text: &str) -> anyhow::Result<()> {
        match self {
            Self::Stdout(writer) => writer.write_all(text.as_bytes())?,
            Self::File { writer, path } => {
                writer
                    .write_all(text.as_bytes())
                    .with_context(|| format!("cannot write {}", path.display()))?;
            }
            Self::Other { writer, path } => {
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
            Self::File { writer, path } => {
                let file = writer.into_inner().map_err(io::IntoInnerError::into_error);
                file.and_then(|file| file.persist(&path).map_err(|fault| fault.error))
                    .with_context(|| format!("cannot write {}", path.display()))?;
            }
            Self::Other { mut writer, path } => {
                writer.flush().with_context(|| format!("cannot write {}", path.display()))?;
            }
        }
        Ok(())
    }
}

/// A temporary file in the folder of another, which takes its place when it is complete.
fn beside(path: &Path, permissions: Option<Permissions>) -> io::Result<BufWriter<NamedTempFile>> {
    let folder = path.parent().filter(|folder| !folder.as_os_str().is_empty()).unwrap_or(Path::new("."));
    let mut builder = tempfile::Builder::new();
    builder.prefix(".cosetta-").suffix(".partial");
    #[cfg(unix)]
    {
        use std::os::unix::fs::PermissionsExt;
        // As a new file of the user, not as a secret one.
        builder.permissions(permissions.unwrap_or_else(|| Permissions::from_mode(0o666)));
    }
    Ok(BufWriter::new(builder.tempfile_in(folder)?))
}

/// The width of the terminal on stdout, if it is one.
pub(super) fn terminal_width() -> Option<u16> {
    io::stdout().is_terminal().then(|| console_width().unwrap_or(100))
}

fn console_width() -> Option<u16> {
    std::env::var("COLUMNS").ok().and_then(|text| text.parse().ok())
}

/// Text for people, without control characters that a file could play to the terminal through its names; line ends stay.
pub(super) fn plain(text: &str) -> Cow<'_, str> {
    let is_control = |c: char| c.is_control() && c != '\n';
    if text.contains(is_control) {
        Cow::Owned(text.replace(is_control, "\u{FFFD}"))
    } else {
        Cow::Borrowed(text)
    }
}

/// One line on stderr.
pub(super) fn talk(line: &str) {
    let _ = writeln!(io::stderr().lock(), "{}", plain(line));
}

/// Whether an error only says that the reader of a pipe has gone.
pub(super) fn is_broken_pipe(error: &anyhow::Error) -> bool {
    error.chain().any(|cause| {
        cause.downcast_ref::<io::Error>().is_some_and(|cause| cause.kind() == io::ErrorKind::BrokenPipe)
    })
}
