//! A set of files in a folder that appears whole or not at all.
//!
//! Everything is first written and flushed to disk in a hidden folder beside the target, then moved into place by
//! renaming, which a file system does in one step. Where the folder exists already, the first of the set (result.json) is
//! taken away before and put there last, so that a folder with it always holds files that belong together.

use crate::problem::Problem;
use crate::run;
use std::fs::{self, File};
use std::io::{self, Write};
use std::path::{Path, PathBuf};

/// A file to write: its name within the folder and its content.
#[derive(Debug, Clone, PartialEq, Eq)]
pub struct OutputFile {
    pub name: &'static str,
    pub bytes: Vec<u8>,
}

impl OutputFile {
    pub fn new(name: &'static str, bytes: impl Into<Vec<u8>>) -> Self {
        OutputFile { name, bytes: bytes.into() }
    }
}

/// The folder of a run within `out`; nothing is made yet.
///
/// # Errors
/// An id that cannot name a folder ([`run::check_id`]).
pub fn run_folder(out: &Path, id: &str) -> Result<PathBuf, Problem> {
    run::check_id(id)?;
    Ok(out.join(id))
}

/// Writes `files` into `folder`, all or none; returns where they are.
///
/// `ours` names every file that such a set can hold: those in the folder that the new set leaves out are taken away, for
/// they would contradict it. Other files in the folder stay as they are. `inputs` are files that must not be replaced.
///
/// # Errors
/// No permission, no space, a symbolic link or a folder where a file should go, an input file in the way. Then what
/// stood in the folder before stands there still.
pub fn write_set(
    folder: &Path,
    files: &[OutputFile],
    ours: &[&str],
    inputs: &[PathBuf],
) -> Result<Vec<PathBuf>, Problem> {
    let parent = match folder.parent() {
        Some(parent) if !parent.as_os_str().is_empty() => parent.to_path_buf(),
        _ => PathBuf::from("."),
    };
    let fresh = look(folder, files, ours, inputs)?;
    let made = make_folders(&parent)?;
    let result = stage_and_move(&parent, folder, fresh, files, ours);
    if result.is_err() {
        // Only folders made here, and only while they are empty: remove_dir takes no other.
        for made_folder in made.iter().rev() {
            let _ = fs::remove_dir(made_folder);
        }
    }
    result
}

/// Looks for what must not be touched; true when the folder does not exist yet.
fn look(folder: &Path, files: &[OutputFile], ours: &[&str], inputs: &[PathBuf]) -> Result<bool, Problem> {
    let link = |path: &Path| {
        Problem::new("this is a symbolic link; writing through it could replace files elsewhere")
            .in_file(path)
            .expected("a folder or file of its own")
            .remedy("remove the link, or choose another --out")
    };
    match fs::symlink_metadata(folder) {
        Err(error) if error.kind() == io::ErrorKind::NotFound => return Ok(true),
        Err(error) => return Err(refused(folder, &error)),
        Ok(data) if data.is_symlink() => return Err(link(folder)),
        Ok(data) if !data.is_dir() => {
            return Err(Problem::new("a file stands where the folder of results should go")
                .in_file(folder)
                .remedy("move that file away, or choose another --out"));
        }
        Ok(_) => {}
    }
    let kept: Vec<PathBuf> = inputs.iter().filter_map(|input| input.canonicalize().ok()).collect();
    for name in files.iter().map(|file| file.name).chain(ours.iter().copied()) {
        let path = folder.join(name);
        match fs::symlink_metadata(&path) {
            Err(error) if error.kind() == io::ErrorKind::NotFound => continue,
            Err(error) => return Err(refused(&path, &error)),
            Ok(data) if data.is_symlink() => return Err(link(&path)),
            Ok(data) if data.is_dir() => {
                return Err(Problem::new("a folder stands where a file of results should go")
                    .in_file(&path)
                    .remedy("move that folder away, or choose another --out"));
            }
            Ok(_) => {}
        }
        if path.canonicalize().is_ok_and(|real| kept.contains(&real)) {
            return Err(Problem::new("this file is an input of the run; the result would replace it")
                .in_file(&path)
                .remedy("choose another --out, or rename the input"));
        }
    }
    Ok(false)
}

/// Makes `folder` and its parents; returns those that were not there, outermost first.
fn make_folders(folder: &Path) -> Result<Vec<PathBuf>, Problem> {
    let mut missing: Vec<PathBuf> = Vec::new();
    let mut at = Some(folder);
    while let Some(path) = at {
        if path.as_os_str().is_empty() || path.exists() {
            break;
        }
        missing.push(path.to_path_buf());
        at = path.parent();
    }
    missing.reverse();
    fs::create_dir_all(folder).map_err(|error| refused(folder, &error))?;
    Ok(missing)
}

fn stage_and_move(
    parent: &Path,
    folder: &Path,
    fresh: bool,
    files: &[OutputFile],
    ours: &[&str],
) -> Result<Vec<PathBuf>, Problem> {
    let staging =
        tempfile::Builder::new().prefix(".burntally-").tempdir_in(parent).map_err(|error| refused(parent, &error))?;
    let new = staging.path().join("new");
    fs::create_dir(&new).map_err(|error| refused(&new, &error))?;
    for file in files {
        stage(&new.join(file.name), &file.bytes).map_err(|error| refused(&folder.join(file.name), &error))?;
    }
    flush_folder(&new);
    if fresh {
        // A folder that appeared since the look is not replaced: renaming onto a folder with files in it fails.
        fs::rename(&new, folder).map_err(|error| refused(folder, &error))?;
    } else {
        swap(&new, &staging.path().join("old"), folder, files, ours)?;
    }
    flush_folder(folder);
    flush_folder(parent);
    Ok(files.iter().map(|file| folder.join(file.name)).collect())
}

fn stage(path: &Path, bytes: &[u8]) -> io::Result<()> {
    let mut file = File::create_new(path)?;
    file.write_all(bytes)?;
    file.sync_all()
}

/// Flushes the names in a folder. Some file systems refuse this; the files themselves are flushed already.
fn flush_folder(folder: &Path) {
    if let Ok(handle) = File::open(folder) {
        let _ = handle.sync_all();
    }
}

/// Replaces our files in a folder that is there: old ones aside, new ones in, the first of the set last.
fn swap(new: &Path, old: &Path, folder: &Path, files: &[OutputFile], ours: &[&str]) -> Result<(), Problem> {
    fs::create_dir(old).map_err(|error| refused(old, &error))?;
    let mut names: Vec<&str> = files.iter().map(|file| file.name).collect();
    names.extend(ours.iter().filter(|name| !files.iter().any(|file| file.name == **name)));
    let mut aside: Vec<&str> = Vec::new();
    let mut placed: Vec<&str> = Vec::new();
    let mut outcome = Ok(());
    for name in names {
        match fs::rename(folder.join(name), old.join(name)) {
            Ok(()) => aside.push(name),
            Err(error) if error.kind() == io::ErrorKind::NotFound => {}
            Err(error) => {
                outcome = Err(refused(&folder.join(name), &error));
                break;
            }
        }
    }
    if outcome.is_ok() {
        for file in files.iter().rev() {
            if let Err(error) = fs::rename(new.join(file.name), folder.join(file.name)) {
                outcome = Err(refused(&folder.join(file.name), &error));
                break;
            }
            placed.push(file.name);
        }
    }
    if outcome.is_err() {
        for name in placed {
            let _ = fs::remove_file(folder.join(name));
        }
        for name in aside {
            let _ = fs::rename(old.join(name), folder.join(name));
        }
    }
    outcome
}

/// What the operating system said, with what a person can do about it.
pub fn refused(path: &Path, error: &io::Error) -> Problem {
    let (found, remedy) = match error.kind() {
        io::ErrorKind::PermissionDenied => {
            ("no permission to write here", "choose a folder of your own with --out, or change its permissions")
        }
        io::ErrorKind::ReadOnlyFilesystem => {
            ("this is on a file system that can only be read", "choose a folder elsewhere with --out")
        }
        io::ErrorKind::StorageFull | io::ErrorKind::QuotaExceeded => {
            ("there is no space left on the disk", "free some space, or choose a folder on another disk with --out")
        }
        io::ErrorKind::NotADirectory | io::ErrorKind::AlreadyExists => {
            ("a file stands where a folder is needed", "choose another folder with --out")
        }
        io::ErrorKind::InvalidFilename => ("the name is not one the file system takes", "choose a shorter, plain name"),
        _ => ("the file could not be written", "choose another folder with --out"),
    };
    Problem::new(format!("{found} ({error})")).in_file(path).remedy(remedy)
}

#[cfg(test)]
mod tests {
    use super::*;

    const OURS: &[&str] = &["result.json", "thrust.svg", "table.csv"];

    fn set(mark: &str) -> Vec<OutputFile> {
        vec![OutputFile::new("result.json", mark), OutputFile::new("table.csv", mark)]
    }

    fn names(folder: &Path) -> Vec<String> {
        let mut names: Vec<String> =
            fs::read_dir(folder).unwrap().map(|entry| entry.unwrap().file_name().into_string().unwrap()).collect();
        names.sort();
        names
    }

    #[test]
    fn a_fresh_folder_appears_with_its_parents_and_nothing_else() {
        let dir = tempfile::tempdir().unwrap();
        let folder = dir.path().join("a/b/FM-07");
        let written = write_set(&folder, &set("one"), OURS, &[]).unwrap();
        assert_eq!(written, [folder.join("result.json"), folder.join("table.csv")]);
        assert_eq!(names(&folder), ["result.json", "table.csv"]);
        assert_eq!(names(&dir.path().join("a/b")), ["FM-07"], "nothing temporary is left");
    }

    #[test]
    fn a_second_time_replaces_ours_takes_stale_ones_away_and_leaves_the_rest() {
        let dir = tempfile::tempdir().unwrap();
        let folder = dir.path().join("FM-07");
        write_set(&folder, &set("one"), OURS, &[]).unwrap();
        fs::write(folder.join("thrust.svg"), "old picture").unwrap();
        fs::write(folder.join("notes.txt"), "mine").unwrap();
        write_set(&folder, &set("two"), OURS, &[]).unwrap();
        assert_eq!(names(&folder), ["notes.txt", "result.json", "table.csv"]);
        assert_eq!(fs::read_to_string(folder.join("result.json")).unwrap(), "two");
        assert_eq!(fs::read_to_string(folder.join("notes.txt")).unwrap(), "mine");
        assert_eq!(names(dir.path()), ["FM-07"]);
    }

    #[test]
    fn when_one_file_cannot_be_placed_the_old_set_stands() {
        let dir = tempfile::tempdir().unwrap();
        let folder = dir.path().join("FM-07");
        write_set(&folder, &set("one"), OURS, &[]).unwrap();
        fs::write(folder.join("thrust.svg"), "old picture").unwrap();
        let new = dir.path().join("new");
        fs::create_dir(&new).unwrap();
        // Of the new set only table.csv was staged, so that placing result.json fails after table.csv went in.
        fs::write(new.join("table.csv"), "two").unwrap();
        let problem = swap(&new, &dir.path().join("old"), &folder, &set("two"), OURS).unwrap_err();
        assert!(problem.file.is_some());
        assert_eq!(fs::read_to_string(folder.join("result.json")).unwrap(), "one");
        assert_eq!(fs::read_to_string(folder.join("table.csv")).unwrap(), "one");
        assert_eq!(fs::read_to_string(folder.join("thrust.svg")).unwrap(), "old picture");
    }

    #[test]
    fn ids_that_would_leave_the_folder_are_refused() {
        let out = Path::new("reduced");
        for id in ["", ".", "..", "../x", "a/b", "a\\b", "a\nb", ".hidden", " a", "a\0", &"x".repeat(201)] {
            assert!(run_folder(out, id).is_err(), "{id:?}");
        }
        assert_eq!(run_folder(out, "FM-07 ü").unwrap(), out.join("FM-07 ü"));
    }

    #[cfg(unix)]
    #[test]
    fn links_are_not_written_through() {
        let dir = tempfile::tempdir().unwrap();
        let elsewhere = dir.path().join("elsewhere");
        fs::create_dir(&elsewhere).unwrap();
        std::os::unix::fs::symlink(&elsewhere, dir.path().join("FM-07")).unwrap();
        let problem = write_set(&dir.path().join("FM-07"), &set("x"), OURS, &[]).unwrap_err();
        assert!(problem.found.contains("symbolic link"));
        assert!(names(&elsewhere).is_empty());

        let folder = dir.path().join("FM-08");
        fs::create_dir(&folder).unwrap();
        fs::write(dir.path().join("raw.csv"), "raw").unwrap();
        std::os::unix::fs::symlink(dir.path().join("raw.csv"), folder.join("table.csv")).unwrap();
        assert!(write_set(&folder, &set("x"), OURS, &[]).is_err());
        assert_eq!(fs::read_to_string(dir.path().join("raw.csv")).unwrap(), "raw");
        assert_eq!(names(&folder), ["table.csv"]);
    }

    #[test]
    fn an_input_in_the_way_is_never_replaced() {
        let dir = tempfile::tempdir().unwrap();
        let folder = dir.path().join("FM-07");
        fs::create_dir(&folder).unwrap();
        let log = folder.join("table.csv");
        fs::write(&log, "the raw log").unwrap();
        let problem = write_set(&folder, &set("x"), OURS, std::slice::from_ref(&log)).unwrap_err();
        assert!(problem.found.contains("input of the run"));
        assert_eq!(fs::read_to_string(&log).unwrap(), "the raw log");
    }

    #[test]
    fn what_was_made_on_the_way_to_a_refusal_is_taken_away() {
        let dir = tempfile::tempdir().unwrap();
        fs::write(dir.path().join("plain"), "").unwrap();
        assert!(write_set(&dir.path().join("plain/FM-07"), &set("x"), OURS, &[]).is_err());
        let twice = [OutputFile::new("result.json", "a"), OutputFile::new("result.json", "b")];
        assert!(write_set(&dir.path().join("deep/er/FM-07"), &twice, OURS, &[]).is_err());
        assert_eq!(names(dir.path()), ["plain"]);
    }

    #[test]
    fn each_cause_has_its_words() {
        let path = Path::new("reduced");
        for (kind, word) in [
            (io::ErrorKind::PermissionDenied, "permission"),
            (io::ErrorKind::ReadOnlyFilesystem, "only be read"),
            (io::ErrorKind::StorageFull, "space"),
            (io::ErrorKind::Other, "could not be written"),
        ] {
            let problem = refused(path, &io::Error::from(kind));
            assert!(problem.found.contains(word), "{kind}: {}", problem.found);
            assert!(problem.remedy.is_some());
        }
    }
}
