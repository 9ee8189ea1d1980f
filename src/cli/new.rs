//! `burntally new`: a run folder with a commented run.toml.

use super::args::NewArguments;
use super::console::{Console, Ending, end};
use super::inputs;
use super::run_template::{FromLog, run_toml};
use crate::export::files;
use crate::log::{Log, ReadRequest};
use crate::problem::Problem;
use crate::report::summary::plain;
use std::fs;
use std::io::Write;
use std::path::{Component, Path, PathBuf};

const RUN_FILE: &str = "run.toml";
/// Any rate reads a log that has no time column; nothing that depends on it is used.
const ANY_RATE_HZ: f64 = 1.0;

pub fn run(arguments: &NewArguments) -> Ending {
    end(new(arguments))
}

fn new(arguments: &NewArguments) -> Result<Ending, Problem> {
    let console = Console::new(arguments.common);
    let dir = &arguments.dir;
    let target = dir.join(RUN_FILE);
    if fs::symlink_metadata(&target).is_ok() {
        return Err(exists(&target));
    }
    if fs::metadata(dir).is_ok_and(|data| !data.is_dir()) {
        return Err(Problem::new("a file stands where the run's folder should go").in_file(dir));
    }
    let read = arguments.log.as_deref().map(|log| look_at(dir, log)).transpose()?;
    let from =
        read.as_ref().map(|(file, log, needs_rate)| FromLog { file: file.clone(), log, needs_rate: *needs_rate });
    let text = run_toml(&id_of(dir), from.as_ref());
    write(dir, &target, &text)?;
    console.say(&format!(
        "written: {}\nOpen it, fill in what it asks for, then: burntally reduce {}",
        plain(&target.display().to_string()),
        plain(&dir.display().to_string())
    ))?;
    console.emit(&serde_json::json!({ "written": target.display().to_string() }).to_string())?;
    Ok(Ending::Done)
}

fn exists(target: &Path) -> Problem {
    Problem::new("there is a run.toml already, and it is not replaced")
        .in_file(target)
        .remedy("edit that one, or name another folder")
}

/// A run's id after its folder, where the name will do.
fn id_of(dir: &Path) -> String {
    let real = std::path::absolute(dir).unwrap_or_else(|_| dir.to_path_buf());
    let name = resolved(&real).file_name().and_then(|name| name.to_str()).map(str::to_owned).unwrap_or_default();
    if files::run_folder(Path::new("."), &name).is_ok() { name } else { "FILL-IN".to_owned() }
}

/// The log's path from the run's folder, its content, and whether it lacks a time.
fn look_at(dir: &Path, log: &Path) -> Result<(String, Log, bool), Problem> {
    let (content, needs_rate) = match inputs::read_log(log, &ReadRequest::default()) {
        Ok(content) => (content, false),
        Err(problem) => {
            let request = ReadRequest { rate_hz: Some(ANY_RATE_HZ), ..ReadRequest::default() };
            match inputs::read_log(log, &request) {
                Ok(content) => (content, true),
                // The first refusal is the one about the log as it stands.
                Err(_) => return Err(problem),
            }
        }
    };
    let absolute = |path: &Path| {
        let path = std::path::absolute(path).map_err(|error| Problem::new(error.to_string()).in_file(path))?;
        Ok::<_, Problem>(resolved(&path))
    };
    let relative = relative(&absolute(dir)?, &absolute(log)?);
    match relative.to_str() {
        Some(file) => Ok((file.to_owned(), content, needs_rate)),
        None => Err(Problem::new("the path of the log is not Unicode text, which run.toml needs")
            .in_file(log)
            .remedy("rename the log or its folder")),
    }
}

/// The path with links resolved as far as it exists, and `.` and `..` taken out of the rest.
fn resolved(path: &Path) -> PathBuf {
    if let Ok(real) = path.canonicalize() {
        return real;
    }
    match (path.parent(), path.components().next_back()) {
        (Some(parent), Some(Component::Normal(name))) => resolved(parent).join(name),
        (Some(parent), Some(Component::ParentDir)) => {
            let above = resolved(parent);
            above.parent().map(Path::to_path_buf).unwrap_or(above)
        }
        _ => path.to_path_buf(),
    }
}

/// How to get from a folder to a file, both absolute.
fn relative(folder: &Path, file: &Path) -> PathBuf {
    let same = folder.components().zip(file.components()).take_while(|(a, b)| a == b).count();
    let up = folder.components().skip(same).map(|_| Component::ParentDir);
    up.chain(file.components().skip(same)).collect()
}

/// Writes the file whole, and only where none is.
fn write(dir: &Path, target: &Path, text: &str) -> Result<(), Problem> {
    let refused = |error: &std::io::Error| files::refused(target, error);
    fs::create_dir_all(dir).map_err(|error| refused(&error))?;
    let mut file = tempfile::Builder::new().prefix(".burntally-").tempfile_in(dir).map_err(|error| refused(&error))?;
    file.write_all(text.as_bytes()).and_then(|()| file.as_file().sync_all()).map_err(|error| refused(&error))?;
    readable(file.as_file()).map_err(|error| refused(&error))?;
    file.persist_noclobber(target).map(|_| ()).map_err(|error| {
        if error.error.kind() == std::io::ErrorKind::AlreadyExists { exists(target) } else { refused(&error.error) }
    })
}

/// Temporary files are made for their owner alone; a run.toml is a file like others.
#[cfg(unix)]
fn readable(file: &fs::File) -> std::io::Result<()> {
    use std::os::unix::fs::PermissionsExt;
    file.set_permissions(fs::Permissions::from_mode(0o644))
}

#[cfg(not(unix))]
fn readable(_: &fs::File) -> std::io::Result<()> {
    Ok(())
}

#[cfg(test)]
mod tests {
    use super::*;

    #[test]
    fn the_way_from_a_folder_to_a_file() {
        for (folder, file, expected) in [
            ("/a/b", "/a/b/log.csv", "log.csv"),
            ("/a/b", "/a/logs/log.csv", "../logs/log.csv"),
            ("/a/b/c", "/x/log.csv", "../../../x/log.csv"),
        ] {
            assert_eq!(relative(Path::new(folder), Path::new(file)), Path::new(expected));
        }
    }

    #[test]
    fn an_id_after_the_folder() {
        assert_eq!(id_of(Path::new("/nowhere/FM-07")), "FM-07");
        assert_eq!(id_of(Path::new("/nowhere/x/../FM-08/.")), "FM-08");
        assert_eq!(id_of(Path::new("/")), "FILL-IN");
    }

    #[test]
    fn what_is_there_is_not_replaced_even_by_a_race() {
        let dir = tempfile::tempdir().unwrap();
        let target = dir.path().join(RUN_FILE);
        fs::write(&target, "mine").unwrap();
        assert!(write(dir.path(), &target, "new").unwrap_err().found.contains("already"));
        assert_eq!(fs::read_to_string(&target).unwrap(), "mine");
        assert_eq!(fs::read_dir(dir.path()).unwrap().count(), 1);
    }
}
