//! Writing: to standard output, or to a file that is replaced only when everything is written.

use std::fs::{self, File};
use std::io::{self, Write};
use std::path::{Path, PathBuf};

use tempfile::NamedTempFile;

use super::failure::Failure;

/// Where a result goes.
#[derive(Debug)]
pub enum Output {
    /// Standard output.
    Standard,
    /// A file, which is written beside its place and then moved there.
    File(PathBuf),
    /// A device or pipe, which cannot be replaced.
    Device(File, PathBuf),
}

impl Output {
    /// Prepares the output, so that a place that cannot be written is told before a long search and not after it.
    ///
    /// # Errors
    /// A directory, a folder that does not exist or that may not be written.
    pub fn open(path: Option<&Path>) -> Result<Output, Failure> {
        let Some(path) = path else { return Ok(Output::Standard) };
        let failed = |error| failure(path, error);
        // A link is followed, so that the file is replaced and not the link.
        let target = fs::canonicalize(path).unwrap_or_else(|_| path.to_path_buf());
        match fs::metadata(&target) {
            Ok(found) if found.is_dir() => Err(failed(io::ErrorKind::IsADirectory.into())),
            Ok(found) if !found.is_file() => {
                let device = File::options().write(true).open(&target).map_err(failed)?;
                Ok(Output::Device(device, target))
            }
            _ => {
                if let Ok(found) = fs::metadata(&target)
                    && found.permissions().readonly()
                {
                    return Err(failed(io::ErrorKind::PermissionDenied.into()));
                }
                // Only tried: nothing must lie about during the search, which may be ended by force.
                aside(&target).map_err(failed)?;
                Ok(Output::File(target))
            }
        }
    }

    /// Writes everything, or leaves the file as it was. A reader that has gone away is no failure.
    ///
    /// # Errors
    /// What the system says, a full disk for instance.
    pub fn write(self, bytes: &[u8]) -> Result<(), Failure> {
        match self {
            Output::Standard => {
                let mut out = io::stdout().lock();
                let written = out.write_all(bytes).and_then(|()| out.flush());
                unless_closed(written).map_err(|error| failure(Path::new("to standard output"), error))
            }
            Output::Device(mut device, path) => {
                unless_closed(device.write_all(bytes)).map_err(|error| failure(&path, error))
            }
            Output::File(path) => {
                let written = aside(&path).and_then(|mut file| {
                    file.write_all(bytes)?;
                    file.as_file().sync_all()?;
                    file.persist(&path).map_err(io::Error::from)
                });
                written.map(|_| ()).map_err(|error| failure(&path, error))
            }
        }
    }
}

/// A file beside a place, with the permissions that a new file has there; it vanishes unless it is moved.
fn aside(path: &Path) -> io::Result<NamedTempFile> {
    let folder = path.parent().filter(|folder| !folder.as_os_str().is_empty()).unwrap_or(Path::new("."));
    let mut builder = tempfile::Builder::new();
    builder.prefix(".roundwell-");
    #[cfg(unix)]
    {
        use std::os::unix::fs::PermissionsExt;
        // The user's mask still applies.
        builder.permissions(fs::Permissions::from_mode(0o666));
    }
    builder.tempfile_in(folder)
}

fn unless_closed(written: io::Result<()>) -> io::Result<()> {
    match written {
        Err(error) if error.kind() == io::ErrorKind::BrokenPipe => Ok(()),
        other => other,
    }
}

fn failure(path: &Path, error: io::Error) -> Failure {
    let help = match error.kind() {
        io::ErrorKind::IsADirectory => "name a file in it",
        io::ErrorKind::NotFound => "make the folder first",
        io::ErrorKind::PermissionDenied => "choose another place, or change its permissions",
        io::ErrorKind::StorageFull => "free some space, or choose another place",
        _ => "",
    };
    Failure::Output { target: path.display().to_string(), error, help }
}

#[cfg(test)]
mod tests {
    #![allow(clippy::unwrap_used)]
    use super::*;

    #[test]
    fn a_file_is_replaced_whole_or_not_at_all() {
        let folder = tempfile::tempdir().unwrap();
        let path = folder.path().join("list.json");
        fs::write(&path, "old").unwrap();
        let output = Output::open(Some(&path)).unwrap();
        assert_eq!(fs::read_to_string(&path).unwrap(), "old");
        assert_eq!(fs::read_dir(folder.path()).unwrap().count(), 1);
        output.write(b"new").unwrap();
        assert_eq!(fs::read_to_string(&path).unwrap(), "new");
        // An output that is given up leaves nothing behind.
        drop(Output::open(Some(&path)).unwrap());
        assert_eq!(fs::read_to_string(&path).unwrap(), "new");
        assert_eq!(fs::read_dir(folder.path()).unwrap().count(), 1);
    }

    #[test]
    fn places_that_cannot_be_written_are_told_at_once() {
        let folder = tempfile::tempdir().unwrap();
        let told = |path: &Path| Output::open(Some(path)).unwrap_err().show(false);
        assert!(told(folder.path()).contains("is a directory"), "{}", told(folder.path()));
        let missing = folder.path().join("missing").join("list.json");
        assert!(told(&missing).contains("make the folder first"), "{}", told(&missing));
    }

    #[cfg(unix)]
    #[test]
    fn a_link_stays_a_link_and_a_device_stays_a_device() {
        let folder = tempfile::tempdir().unwrap();
        let (file, link) = (folder.path().join("list.json"), folder.path().join("link.json"));
        fs::write(&file, "old").unwrap();
        std::os::unix::fs::symlink(&file, &link).unwrap();
        Output::open(Some(&link)).unwrap().write(b"new").unwrap();
        assert!(fs::symlink_metadata(&link).unwrap().is_symlink());
        assert_eq!(fs::read_to_string(&file).unwrap(), "new");
        Output::open(Some(Path::new("/dev/null"))).unwrap().write(b"new").unwrap();
        assert!(!fs::metadata("/dev/null").unwrap().is_file());
    }
}
