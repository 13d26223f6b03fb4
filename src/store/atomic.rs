//! Whole files or none.

use super::StoreError;
use serde::Serialize;
use std::ffi::OsString;
use std::fs;
use std::fs::File;
use std::io;
use std::io::BufWriter;
use std::io::Write;
use std::path::Path;
use std::path::PathBuf;
use std::sync::atomic::AtomicU32;
use std::sync::atomic::Ordering;

/// Writes a file so that at any moment, even one of a power cut, it is whole: the old one or the new one.
///
/// The content goes to a temporary name in the same folder, is synced, and takes the name; then the folder is synced.
/// When anything fails, the temporary file is removed and what stood under the name is untouched.
///
/// # Errors
/// [`StoreError::Io`] with `path` and the system's reason, the error of `write` included.
///
/// ```
/// # let folder = tempfile::tempdir()?;
/// let path = folder.path().join("note.txt");
/// evenpoise::store::write_atomically(&path, |file| file.write_all(b"level 3.2 m"))?;
/// assert_eq!(std::fs::read(&path)?, b"level 3.2 m");
/// # Ok::<(), Box<dyn std::error::Error>>(())
/// ```
pub fn write_atomically(path: &Path, write: impl FnOnce(&mut dyn Write) -> io::Result<()>) -> Result<(), StoreError> {
    let temporary = temporary_name(path);
    let written = write_and_sync(&temporary, write).and_then(|()| fs::rename(&temporary, path));
    if let Err(error) = written {
        // Best effort: the first error is the one to tell.
        let _ = fs::remove_file(&temporary);
        return Err(StoreError::io("write", path)(error));
    }
    sync_folder(folder_of(path)).map_err(StoreError::io("sync the folder of", path))
}

/// Writes a value as indented JSON with a final line end, atomically.
///
/// # Errors
/// [`StoreError::Io`] with the path.
pub fn write_json<T: Serialize>(path: &Path, value: &T) -> Result<(), StoreError> {
    write_atomically(path, |file| {
        serde_json::to_writer_pretty(&mut *file, value)?;
        file.write_all(b"\n")
    })
}

fn write_and_sync(path: &Path, write: impl FnOnce(&mut dyn Write) -> io::Result<()>) -> io::Result<()> {
    let mut file = BufWriter::new(File::create_new(path)?);
    write(&mut file)?;
    file.flush()?;
    file.get_ref().sync_all()
}

/// `.name.<process>-<count>.partial` in the same folder: a rename within a folder cannot cross file systems, and two
/// writers never meet.
fn temporary_name(path: &Path) -> PathBuf {
    static COUNT: AtomicU32 = AtomicU32::new(0);
    let mut name = OsString::from(".");
    name.push(path.file_name().unwrap_or_default());
    name.push(format!(".{}-{}.partial", std::process::id(), COUNT.fetch_add(1, Ordering::Relaxed)));
    folder_of(path).join(name)
}

/// Whether a name is one that [`temporary_name`] makes.
pub(super) fn is_temporary(name: &str) -> bool {
    let inside = name.strip_prefix('.').and_then(|name| name.strip_suffix(".partial"));
    let numbers = inside.and_then(|name| name.rsplit_once('.')).and_then(|(_, numbers)| numbers.split_once('-'));
    let whole = |text: &str| !text.is_empty() && text.bytes().all(|byte| byte.is_ascii_digit());
    numbers.is_some_and(|(process, count)| whole(process) && whole(count))
}

/// The folder a file is in; `"note.txt"` is in `"."`.
fn folder_of(path: &Path) -> &Path {
    match path.parent() {
        Some(parent) if !parent.as_os_str().is_empty() => parent,
        _ => Path::new("."),
    }
}

/// Makes the names in a folder durable. Systems that cannot open a folder keep their names in another way.
pub(super) fn sync_folder(folder: &Path) -> io::Result<()> {
    if cfg!(unix) { File::open(folder)?.sync_all() } else { Ok(()) }
}

#[cfg(test)]
mod tests {
    use super::*;
    use tempfile::tempdir;

    fn names(folder: &Path) -> Vec<String> {
        let mut names: Vec<String> =
            fs::read_dir(folder).unwrap().map(|entry| entry.unwrap().file_name().into_string().unwrap()).collect();
        names.sort();
        names
    }

    #[test]
    fn a_failed_write_leaves_the_old_file_and_nothing_else() {
        let folder = tempdir().unwrap();
        let path = folder.path().join("a.json");
        write_json(&path, &[1.5, 0.1]).unwrap();
        assert_eq!(fs::read_to_string(&path).unwrap(), "[\n  1.5,\n  0.1\n]\n");
        let error = write_atomically(&path, |file| {
            file.write_all(b"half of")?;
            Err(io::Error::other("no space left"))
        })
        .unwrap_err();
        assert!(error.to_string().ends_with("a.json"), "{error}");
        assert_eq!(fs::read_to_string(&path).unwrap(), "[\n  1.5,\n  0.1\n]\n");
        assert_eq!(names(folder.path()), ["a.json"]);
    }

    #[test]
    fn temporary_names_are_known_again() {
        let name = temporary_name(Path::new("a/points.csv"));
        assert_eq!(name.parent().unwrap(), Path::new("a"));
        assert!(is_temporary(name.file_name().unwrap().to_str().unwrap()));
        for other in ["points.csv", ".partial", ".a.partial", ".a.1-.partial", ".a.x-1.partial"] {
            assert!(!is_temporary(other), "{other}");
        }
    }

    #[test]
    fn a_missing_folder_is_an_error_with_the_path() {
        let folder = tempdir().unwrap();
        let error = write_atomically(&folder.path().join("no/a.json"), |_| Ok(())).unwrap_err();
        assert!(
            matches!(error, StoreError::Io { action: "write", source, .. } if source.kind() == io::ErrorKind::NotFound)
        );
    }
}
