//! Opening what a person named.

use super::output::{Failure, Terminal};
use crate::plan::checked::{Compilation, compile};
use crate::plan::syntax::LARGEST_PLAN;
use crate::world::{Kind, Links};
use std::io::{self, Read};
use std::path::Path;

/// A file that is there and is a file.
pub(super) fn must_be_a_file(terminal: &Terminal<'_>, path: &Path, what: &str) -> Result<(), Failure> {
    match terminal.world.kind(path, Links::Follow) {
        Ok(Kind::File(_)) => Ok(()),
        Ok(Kind::Folder) => Err(Failure::other(format!("{what} `{}` is a folder", path.display()), "name the file itself")),
        Ok(Kind::Nothing) => Err(Failure::other(format!("there is no {what} `{}`", path.display()), "look at the spelling of the path")),
        Ok(_) => Err(Failure::other(format!("{what} `{}` is not a file", path.display()), "name a regular file")),
        Err(error) => Err(unreadable(path, &error)),
    }
}

/// Reads a plan, which is text and not large, and compiles it.
pub(super) fn compile_file(terminal: &Terminal<'_>, path: &Path) -> Result<Compilation, Failure> {
    must_be_a_file(terminal, path, "plan")?;
    let mut bytes = Vec::new();
    // One byte more than allowed is enough to know that it is too large.
    let limit = LARGEST_PLAN as u64 + 1;
    terminal.world.open(path).and_then(|file| file.take(limit).read_to_end(&mut bytes)).map_err(|error| unreadable(path, &error))?;
    Ok(compile(&path.display().to_string(), &bytes))
}

pub(super) fn open(terminal: &Terminal<'_>, path: &Path) -> Result<Box<dyn Read + Send>, Failure> {
    terminal.world.open(path).map_err(|error| unreadable(path, &error))
}

fn unreadable(path: &Path, error: &io::Error) -> Failure {
    let status = if error.kind() == io::ErrorKind::NotFound { 1 } else { 3 };
    Failure::Other {
        status,
        message: format!("`{}` cannot be read: {error}", path.display()),
        hint: "look at the path and at who may read it".to_owned(),
    }
}
