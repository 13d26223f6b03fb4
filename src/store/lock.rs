//! One process at a time.

use super::StoreError;
use std::fs;
use std::fs::File;
use std::fs::OpenOptions;
use std::fs::TryLockError;
use std::io::Read;
use std::io::Seek;
use std::io::Write;
use std::path::Path;
use std::path::PathBuf;
use std::sync::atomic::AtomicU32;
use std::sync::atomic::Ordering;

/// Name of the lock file in a folder.
pub(super) const LOCK_FILE: &str = "lock";

/// Tries before giving up on a lock file that keeps vanishing between opening and locking.
const TRIES: u32 = 20;

/// A folder held by this process until the value is dropped.
///
/// The lock file names the process, and is locked with the operating system. The system's lock ends with the process,
/// however it ends: a file that is still there but not locked is stale, and is taken over.
#[derive(Debug)]
pub struct Lock {
    path: PathBuf,
    /// Open, and with it locked, as long as the value lives.
    _file: File,
    stale: Option<String>,
}

impl Lock {
    /// Takes the folder.
    ///
    /// # Errors
    /// [`StoreError::InUse`] with the process that has it; [`StoreError::Io`] when the file system refuses.
    ///
    /// ```
    /// # let folder = tempfile::tempdir()?;
    /// use evenpoise::store::Lock;
    /// let lock = Lock::take(folder.path())?;
    /// assert!(Lock::take(folder.path()).is_err());
    /// drop(lock);
    /// assert!(Lock::take(folder.path()).is_ok());
    /// # Ok::<(), Box<dyn std::error::Error>>(())
    /// ```
    pub fn take(folder: &Path) -> Result<Self, StoreError> {
        let path = folder.join(LOCK_FILE);
        for _ in 0..TRIES {
            let options = OpenOptions::new().read(true).write(true).create(true).truncate(false).open(&path);
            let mut file = options.map_err(StoreError::io("open", &path))?;
            match file.try_lock() {
                Ok(()) => {}
                Err(TryLockError::WouldBlock) => {
                    let holder = holder(&mut file).unwrap_or_else(|| "another process".to_owned());
                    return Err(StoreError::InUse { folder: folder.to_path_buf(), holder });
                }
                Err(TryLockError::Error(source)) => return Err(StoreError::io("lock", &path)(source)),
            }
            let stale = holder(&mut file);
            let name = name_of_this_process();
            write_name(&mut file, &name).map_err(StoreError::io("write", &path))?;
            // The holder before removes its file: a file opened before that and locked after is no longer this one.
            if fs::read_to_string(&path).is_ok_and(|text| text == name) {
                return Ok(Self { path, _file: file, stale });
            }
        }
        Err(StoreError::InUse { folder: folder.to_path_buf(), holder: "processes that come and go".to_owned() })
    }

    /// The process that left its lock file behind (killed, or the machine stopped), if one did.
    #[must_use]
    pub fn stale(&self) -> Option<&str> {
        self.stale.as_deref()
    }
}

impl Drop for Lock {
    fn drop(&mut self) {
        // Removed while still locked; a file that cannot be removed is stale, and recognised as such.
        let _ = fs::remove_file(&self.path);
    }
}

/// What the lock file says, if anything.
fn holder(file: &mut File) -> Option<String> {
    let mut text = String::new();
    file.read_to_string(&mut text).ok()?;
    let first = text.lines().next()?.trim();
    (!first.is_empty()).then(|| first.to_owned())
}

fn write_name(file: &mut File, name: &str) -> std::io::Result<()> {
    file.set_len(0)?;
    file.rewind()?;
    file.write_all(name.as_bytes())?;
    file.sync_all()
}

/// `process 4711`, and on a second line which lock of this process it is.
fn name_of_this_process() -> String {
    static COUNT: AtomicU32 = AtomicU32::new(0);
    format!("process {}\n{}\n", std::process::id(), COUNT.fetch_add(1, Ordering::Relaxed))
}

#[cfg(test)]
mod tests {
    use super::*;
    use tempfile::tempdir;

    #[test]
    fn the_second_taker_is_told_who_holds_the_folder() {
        let folder = tempdir().unwrap();
        let first = Lock::take(folder.path()).unwrap();
        assert_eq!(first.stale(), None);
        let error = Lock::take(folder.path()).unwrap_err();
        assert!(error.to_string().contains(&format!("process {}", std::process::id())), "{error}");
        drop(first);
        assert!(!folder.path().join(LOCK_FILE).exists());
    }

    #[test]
    fn a_lock_file_without_its_process_is_stale() {
        let folder = tempdir().unwrap();
        fs::write(folder.path().join(LOCK_FILE), "process 999999\n7\n").unwrap();
        let lock = Lock::take(folder.path()).unwrap();
        assert_eq!(lock.stale(), Some("process 999999"));
        assert!(Lock::take(folder.path()).is_err());
    }

    /// Four threads take it ten times each: never two at once.
    #[test]
    fn two_never_hold_it_at_once() {
        let folder = tempdir().unwrap();
        let inside = AtomicU32::new(0);
        let ten_times = || {
            let mut taken = 0;
            while taken < 10 {
                let Ok(lock) = Lock::take(folder.path()) else {
                    std::thread::yield_now();
                    continue;
                };
                assert_eq!(inside.fetch_add(1, Ordering::SeqCst), 0);
                std::thread::yield_now();
                inside.fetch_sub(1, Ordering::SeqCst);
                drop(lock);
                taken += 1;
            }
        };
        std::thread::scope(|scope| {
            for _ in 0..4 {
                scope.spawn(ten_times);
            }
        });
        assert!(!folder.path().join(LOCK_FILE).exists());
    }
}
