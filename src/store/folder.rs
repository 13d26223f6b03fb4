//! The folder of a run.

use super::Lock;
use super::StoreError;
use super::atomic::is_temporary;
use super::journal::journal_path;
use std::fs;
use std::io;
use std::path::Path;
use std::path::PathBuf;

/// Everything that a run writes into its folder. The journal makes it the folder of a run: it is written first
/// ([`Journal::create`](super::Journal::create) before any other file), and removed last.
pub const RUN_ENTRIES: [&str; 17] = [
    "report.html",
    "report.md",
    "summary.json",
    "comparison.json",
    "proposal.json",
    "points.csv",
    "rounds.csv",
    "even.csv",
    "weighted.csv",
    "timings.json",
    "log.txt",
    "figures",
    "estimate",
    "asked",
    "answered",
    "problem.toml",
    "evaluations",
];

/// A run's folder, held by this process until the value is dropped.
#[derive(Debug)]
pub struct RunFolder {
    path: PathBuf,
    lock: Lock,
}

impl RunFolder {
    /// Makes the folder, or takes an existing one that holds nothing a run would overwrite.
    ///
    /// With `force` a run in it is removed first: the entries in [`RUN_ENTRIES`] and nothing else. A folder that holds such
    /// an entry but no journal was not written by a run (it may be where the problem file lives), and is refused even so.
    ///
    /// # Errors
    /// [`StoreError::HoldsRun`], [`StoreError::HoldsOther`], [`StoreError::InUse`], [`StoreError::Io`].
    pub fn create(path: &Path, force: bool) -> Result<Self, StoreError> {
        fs::create_dir_all(path).map_err(StoreError::io("create the folder", path))?;
        let lock = Lock::take(path)?;
        remove_leftovers(path)?;
        let present: Vec<&str> = RUN_ENTRIES.into_iter().filter(|name| is_there(&path.join(name))).collect();
        if let Some(entry) = present.first() {
            if !journal_path(path).is_file() {
                return Err(StoreError::HoldsOther { folder: path.to_path_buf(), entry: (*entry).to_owned() });
            }
            if !force {
                return Err(StoreError::HoldsRun { folder: path.to_path_buf() });
            }
            for name in present {
                remove(&path.join(name))?;
            }
        }
        Ok(Self { path: path.to_path_buf(), lock })
    }

    /// Takes the folder of a run that was begun, to go on with it.
    ///
    /// # Errors
    /// [`StoreError::HoldsNoRun`], [`StoreError::InUse`], [`StoreError::Io`].
    pub fn open(path: &Path) -> Result<Self, StoreError> {
        if !journal_path(path).is_file() {
            return Err(StoreError::HoldsNoRun { folder: path.to_path_buf() });
        }
        let lock = Lock::take(path)?;
        remove_leftovers(path)?;
        Ok(Self { path: path.to_path_buf(), lock })
    }

    /// Removes what the run has written, and the folder where nothing else is in it: for a run that never began.
    ///
    /// # Errors
    /// [`StoreError::Io`].
    pub fn discard(self) -> Result<(), StoreError> {
        for name in RUN_ENTRIES.into_iter().filter(|name| is_there(&self.path.join(name))) {
            remove(&self.path.join(name))?;
        }
        drop(self.lock);
        // Fails, as it should, when the folder holds anything else.
        let _ = fs::remove_dir(&self.path);
        Ok(())
    }

    /// Where it is.
    #[must_use]
    pub fn path(&self) -> &Path {
        &self.path
    }

    /// The path of a file in it.
    #[must_use]
    pub fn join(&self, name: &str) -> PathBuf {
        self.path.join(name)
    }

    /// The process that left its lock behind, if one did: worth a line to the user.
    #[must_use]
    pub fn stale_lock(&self) -> Option<&str> {
        self.lock.stale()
    }

    /// Makes a folder inside, if it is not there.
    ///
    /// # Errors
    /// [`StoreError::Io`].
    pub fn create_inside(&self, name: &str) -> Result<PathBuf, StoreError> {
        let path = self.join(name);
        fs::create_dir_all(&path).map_err(StoreError::io("create the folder", &path))?;
        Ok(path)
    }
}

/// Clears away what a killed process left half written: temporary files, and an `evaluations` folder without anything in
/// it, which was made for a journal that never came.
fn remove_leftovers(path: &Path) -> Result<(), StoreError> {
    for folder in [path.to_path_buf(), path.join("evaluations"), path.join("figures"), path.join("estimate")] {
        let Ok(entries) = fs::read_dir(&folder) else { continue };
        for entry in entries {
            let entry = entry.map_err(StoreError::io("read", &folder))?;
            if is_temporary(&entry.file_name().to_string_lossy()) {
                remove(&entry.path())?;
            }
        }
    }
    // Fails, as it should, when the folder holds anything or is not there.
    let _ = fs::remove_dir(path.join("evaluations"));
    Ok(())
}

/// Whether there is anything under that name, a dangling link included.
fn is_there(path: &Path) -> bool {
    fs::symlink_metadata(path).is_ok()
}

/// Removes a file, a folder with all in it, or a link (and never what it points to).
fn remove(path: &Path) -> Result<(), StoreError> {
    let kind = fs::symlink_metadata(path).map_err(StoreError::io("read", path))?;
    let removed = if kind.is_dir() { fs::remove_dir_all(path) } else { fs::remove_file(path) };
    match removed {
        Err(error) if error.kind() == io::ErrorKind::NotFound => Ok(()),
        other => other.map_err(StoreError::io("remove", path)),
    }
}

#[cfg(test)]
mod tests {
    use super::*;
    use tempfile::tempdir;

    /// A folder that looks like that of a run.
    fn pretend_run(path: &Path) {
        fs::create_dir_all(path.join("evaluations")).unwrap();
        fs::create_dir_all(path.join("figures")).unwrap();
        fs::write(journal_path(path), "records").unwrap();
        fs::write(path.join("figures/a.png"), "a").unwrap();
        fs::write(path.join("problem.toml"), "p").unwrap();
    }

    #[test]
    fn a_run_is_only_replaced_by_force_and_what_is_not_of_it_stays() {
        let folder = tempdir().unwrap();
        let path = folder.path().join("canal.run");
        pretend_run(&path);
        fs::write(path.join("notes.txt"), "mine").unwrap();
        assert!(matches!(RunFolder::create(&path, false), Err(StoreError::HoldsRun { .. })));
        assert!(path.join("figures/a.png").exists());
        let run = RunFolder::create(&path, true).unwrap();
        assert!(
            !path.join("figures").exists() && !path.join("evaluations").exists() && !path.join("problem.toml").exists()
        );
        assert_eq!(fs::read_to_string(run.join("notes.txt")).unwrap(), "mine");
    }

    #[test]
    fn a_run_that_never_began_leaves_nothing() {
        let folder = tempdir().unwrap();
        let (own, shared) = (folder.path().join("own.run"), folder.path().join("shared.run"));
        fs::create_dir(&shared).unwrap();
        fs::write(shared.join("notes.txt"), "mine").unwrap();
        for path in [&own, &shared] {
            let run = RunFolder::create(path, false).unwrap();
            pretend_run(path);
            run.discard().unwrap();
        }
        assert!(!own.exists());
        assert_eq!(fs::read_dir(&shared).unwrap().count(), 1);
    }

    #[test]
    fn a_problem_file_in_the_way_is_never_removed() {
        let folder = tempdir().unwrap();
        fs::write(folder.path().join("problem.toml"), "the only copy").unwrap();
        for force in [false, true] {
            let error = RunFolder::create(folder.path(), force).unwrap_err();
            assert!(matches!(&error, StoreError::HoldsOther { entry, .. } if entry == "problem.toml"), "{error}");
        }
        assert_eq!(fs::read_to_string(folder.path().join("problem.toml")).unwrap(), "the only copy");
    }

    /// A process killed before its first record leaves no trace that stands in the way of the next.
    #[test]
    fn what_a_kill_left_behind_is_cleared_away() {
        let folder = tempdir().unwrap();
        let path = folder.path().join("d.run");
        fs::create_dir_all(path.join("evaluations")).unwrap();
        fs::write(path.join("evaluations/.journal.999999-0.partial"), "half").unwrap();
        fs::write(path.join("lock"), "process 999999\n0\n").unwrap();
        drop(RunFolder::create(&path, false).unwrap());
        assert_eq!(fs::read_dir(&path).unwrap().count(), 0);
        pretend_run(&path);
        fs::write(path.join(".summary.json.999999-3.partial"), "{").unwrap();
        fs::write(path.join("figures/.a.png.999999-4.partial"), "a").unwrap();
        fs::write(path.join(".mine.partial"), "not ours: no process in its name").unwrap();
        drop(RunFolder::open(&path).unwrap());
        assert!(path.join("figures/a.png").exists() && path.join(".mine.partial").exists());
        assert!(!path.join(".summary.json.999999-3.partial").exists());
        assert_eq!(fs::read_dir(path.join("figures")).unwrap().count(), 1);
    }

    #[test]
    fn one_process_at_a_time_and_no_run_no_resume() {
        let folder = tempdir().unwrap();
        let path = folder.path().join("a/b.run");
        let run = RunFolder::create(&path, false).unwrap();
        assert!(matches!(RunFolder::create(&path, true), Err(StoreError::InUse { .. })));
        assert!(matches!(RunFolder::open(&path), Err(StoreError::HoldsNoRun { .. })));
        drop(run);
        pretend_run(&path);
        fs::write(path.join("lock"), "process 999999\n0\n").unwrap();
        let run = RunFolder::open(&path).unwrap();
        assert_eq!(run.stale_lock(), Some("process 999999"));
        assert!(run.create_inside("asked").unwrap().is_dir());
    }

    #[cfg(unix)]
    #[test]
    fn replacing_a_run_removes_links_and_not_what_they_point_to() {
        let folder = tempdir().unwrap();
        let path = folder.path().join("c.run");
        let elsewhere = folder.path().join("elsewhere");
        fs::create_dir(&elsewhere).unwrap();
        fs::write(elsewhere.join("keep.csv"), "1").unwrap();
        pretend_run(&path);
        std::os::unix::fs::symlink(&elsewhere, path.join("answered")).unwrap();
        drop(RunFolder::create(&path, true).unwrap());
        assert!(elsewhere.join("keep.csv").exists() && !is_there(&path.join("answered")));
    }
}
