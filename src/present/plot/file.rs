//! Writing a picture in one piece: a temporary beside the target, renamed when it is whole.

use super::error::PlotError;
use super::picture::Picture;
use super::render;
use std::io::{self, Write};
use std::path::{Path, PathBuf};
use tempfile::{Builder, NamedTempFile};

/// The two kinds of picture file.
#[derive(Clone, Copy, Debug, PartialEq, Eq)]
enum Format {
    Svg,
    Png,
}

/// A picture file that has been asked for. Make it before a long computation, so that a name that cannot work is
/// refused at once.
#[derive(Clone, Debug)]
pub struct PlotFile {
    path: PathBuf,
    format: Format,
    overwrite: bool,
}

impl PlotFile {
    /// Check the name: it ends in `.svg` or `.png` (letters of either case), its folder exists, and the file itself
    /// does not, unless `overwrite`.
    pub fn new(path: &Path, overwrite: bool) -> Result<Self, PlotError> {
        let file = PlotFile {
            path: path.to_path_buf(),
            format: format(path)?,
            overwrite,
        };
        if !file.folder().is_dir() {
            return Err(file.unwritable(io::Error::from(io::ErrorKind::NotFound)));
        }
        if !overwrite && path.exists() {
            return Err(PlotError::Exists {
                path: path.to_path_buf(),
            });
        }
        Ok(file)
    }

    /// Draw `picture` into the file. An existing file stays untouched until the new one is whole.
    pub fn write(&self, picture: &Picture) -> Result<(), PlotError> {
        let bytes = match self.format {
            Format::Svg => render::svg(picture)?.into_bytes(),
            Format::Png => render::png(picture)?,
        };
        let mut temporary = self.temporary().map_err(|source| self.unwritable(source))?;
        temporary
            .write_all(&bytes)
            .map_err(|source| self.unwritable(source))?;
        self.rename(temporary)
    }

    /// A temporary beside the target, with the rights of an ordinary new file.
    fn temporary(&self) -> io::Result<NamedTempFile> {
        let mut builder = Builder::new();
        builder.prefix(".cleanswing-");
        #[cfg(unix)]
        {
            use std::os::unix::fs::PermissionsExt;
            builder.permissions(std::fs::Permissions::from_mode(0o666));
        }
        builder.tempfile_in(self.folder())
    }

    fn rename(&self, temporary: NamedTempFile) -> Result<(), PlotError> {
        let renamed = if self.overwrite {
            temporary.persist(&self.path)
        } else {
            temporary.persist_noclobber(&self.path)
        };
        renamed
            .map(|_| ())
            .map_err(|failure| match failure.error.kind() {
                io::ErrorKind::AlreadyExists => PlotError::Exists {
                    path: self.path.clone(),
                },
                _ => self.unwritable(failure.error),
            })
    }

    fn folder(&self) -> &Path {
        self.path
            .parent()
            .filter(|folder| !folder.as_os_str().is_empty())
            .unwrap_or(Path::new("."))
    }

    fn unwritable(&self, source: io::Error) -> PlotError {
        PlotError::Write {
            path: self.path.clone(),
            source,
        }
    }
}

fn format(path: &Path) -> Result<Format, PlotError> {
    let extension = path
        .extension()
        .map(|extension| extension.to_string_lossy().to_lowercase());
    match extension.as_deref() {
        Some("svg") => Ok(Format::Svg),
        Some("png") => Ok(Format::Png),
        _ => Err(PlotError::UnknownExtension {
            path: path.to_path_buf(),
        }),
    }
}

#[cfg(test)]
#[allow(clippy::unwrap_used)]
mod tests {
    use super::*;
    use crate::failure::FailureKind;
    use std::fs;

    #[test]
    fn any_other_extension_is_refused_by_name() {
        for name in ["plot.pdf", "plot", "svg"] {
            let error = PlotFile::new(Path::new(name), true).unwrap_err();
            assert!(
                matches!(error, PlotError::UnknownExtension { .. }),
                "{name}: {error}"
            );
            assert_eq!(error.kind(), FailureKind::BadRequest);
        }
    }

    #[test]
    fn an_existing_file_is_kept_unless_told() {
        let folder = tempfile::tempdir().unwrap();
        let path = folder.path().join("plot.SVG");
        fs::write(&path, "mine").unwrap();
        assert!(matches!(
            PlotFile::new(&path, false),
            Err(PlotError::Exists { .. })
        ));
        PlotFile::new(&path, true)
            .unwrap()
            .write(&Picture::new(200.0, 100.0))
            .unwrap();
        assert!(fs::read_to_string(&path).unwrap().starts_with("<svg"));
    }

    #[test]
    fn a_file_that_appears_during_the_computation_is_kept_too() {
        let folder = tempfile::tempdir().unwrap();
        let path = folder.path().join("plot.png");
        let file = PlotFile::new(&path, false).unwrap();
        fs::write(&path, "mine").unwrap();
        assert!(matches!(
            file.write(&Picture::new(200.0, 100.0)),
            Err(PlotError::Exists { .. })
        ));
        assert_eq!(fs::read_to_string(&path).unwrap(), "mine");
        assert_eq!(
            fs::read_dir(folder.path()).unwrap().count(),
            1,
            "a temporary was left behind"
        );
    }

    #[test]
    fn a_missing_folder_is_named_before_anything_is_computed() {
        let folder = tempfile::tempdir().unwrap();
        let error = PlotFile::new(&folder.path().join("none/plot.svg"), false).unwrap_err();
        assert!(
            error
                .to_string()
                .contains("none/plot.svg: cannot be written"),
            "{error}"
        );
    }
}
