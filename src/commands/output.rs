//! Where words and files go: results to standard output, the rest to standard error, files whole or not at all.

use std::io::{self, Write};
use std::path::Path;

use super::CommandError;

/// Print a result. That nobody reads it any more is no failure.
pub fn print(text: &str) -> Result<(), CommandError> {
    let mut out = io::stdout().lock();
    match out.write_all(text.as_bytes()).and_then(|()| out.flush()) {
        Err(error) if error.kind() != io::ErrorKind::BrokenPipe => Err(CommandError::Output(error)),
        _ => Ok(()),
    }
}

/// Say something beside the result; there is nobody to tell where even that fails.
pub fn say(text: &str) {
    let _ = io::stderr().lock().write_all(text.as_bytes());
}

/// Write a text file whole: a temporary beside it, renamed.
pub fn write_file(path: &Path, text: &str, overwrite: bool) -> Result<(), CommandError> {
    let unwritable = |source| CommandError::Unwritable {
        path: path.to_owned(),
        source,
    };
    let exists = || CommandError::Exists {
        path: path.to_owned(),
    };
    match path.metadata() {
        Ok(found) if !found.is_file() => {
            return Err(unwritable(io::ErrorKind::IsADirectory.into()));
        }
        Ok(_) if !overwrite => return Err(exists()),
        _ => {}
    }
    let folder = path
        .parent()
        .filter(|folder| !folder.as_os_str().is_empty())
        .unwrap_or(Path::new("."));
    let mut temporary = builder().tempfile_in(folder).map_err(unwritable)?;
    temporary.write_all(text.as_bytes()).map_err(unwritable)?;
    let renamed = if overwrite {
        temporary.persist(path)
    } else {
        temporary.persist_noclobber(path)
    };
    match renamed {
        Ok(_) => Ok(()),
        Err(failure) if failure.error.kind() == io::ErrorKind::AlreadyExists => Err(exists()),
        Err(failure) => Err(unwritable(failure.error)),
    }
}

/// Temporaries with the access rights of an ordinary new file.
fn builder() -> tempfile::Builder<'static, 'static> {
    let mut builder = tempfile::Builder::new();
    builder.prefix(".cleanswing-");
    #[cfg(unix)]
    {
        use std::os::unix::fs::PermissionsExt;
        builder.permissions(std::fs::Permissions::from_mode(0o666));
    }
    builder
}
