//! How the program ends.

use std::process::ExitCode;

/// The exit status.
#[derive(Debug, Clone, Copy, PartialEq, Eq, PartialOrd, Ord)]
pub enum Exit {
    /// 0: done.
    Done,
    /// 1: it ran, but some input was refused.
    Refused,
    /// 2: the command line is not understood.
    Usage,
    /// 3: input or output failed, or the program is at fault.
    Fault,
}

impl From<Exit> for ExitCode {
    fn from(exit: Exit) -> Self {
        Self::from(match exit {
            Exit::Done => 0,
            Exit::Refused => 1,
            Exit::Usage => 2,
            Exit::Fault => 3,
        })
    }
}
