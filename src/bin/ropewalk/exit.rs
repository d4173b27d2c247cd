//! Exit codes: 0 complete, 1 some snapshots failed, 2 usage, 3 input unusable, 4 refused by the memory budget, 5 output or internal.

use std::process::ExitCode;

use ropewalk::base::error::{Error, Kind};

/// Some snapshots failed, the others are done.
pub const PARTIAL: u8 = 1;
/// The command line is wrong.
pub const USAGE: u8 = 2;

/// The code of an error that ended the run.
pub fn code(e: &Error) -> ExitCode {
    ExitCode::from(number(e))
}

/// The same as a number.
pub fn number(e: &Error) -> u8 {
    match e.kind() {
        Kind::Usage => USAGE,
        Kind::Input | Kind::Data => 3,
        Kind::Limit => 4,
        Kind::Output | Kind::Internal => 5,
    }
}
