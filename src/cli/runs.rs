//! From what was named on the command line to single runs.

use crate::problem::Problem;
use std::collections::HashSet;
use std::fs;
use std::io;
use std::path::{Path, PathBuf};

const RUN_FILE: &str = "run.toml";
/// Deeper folders are not searched; a tree of runs is never that deep.
const DEEPEST: usize = 32;

/// One run to reduce.
#[derive(Debug, Clone, PartialEq, Eq)]
pub enum Source {
    /// A run.toml.
    Described(PathBuf),
    /// A log without one.
    BareLog(PathBuf),
}

impl Source {
    pub fn path(&self) -> &Path {
        match self {
            Source::Described(path) | Source::BareLog(path) => path,
        }
    }
}

/// The runs behind each name, in the order given and sorted within a folder; a file reached twice is taken once.
pub fn find(names: &[PathBuf]) -> Vec<Result<Source, Problem>> {
    let mut seen = HashSet::new();
    let mut found = Vec::new();
    for name in names {
        match behind(name) {
            Err(problem) => found.push(Err(problem)),
            Ok(sources) => {
                for source in sources {
                    let real = source.path().canonicalize().unwrap_or_else(|_| source.path().to_path_buf());
                    if seen.insert(real) {
                        found.push(Ok(source));
                    }
                }
            }
        }
    }
    found
}

fn behind(name: &Path) -> Result<Vec<Source>, Problem> {
    let data = fs::metadata(name).map_err(|error| unreadable(name, &error))?;
    if !data.is_dir() {
        let described = name.extension().is_some_and(|ending| ending.eq_ignore_ascii_case("toml"));
        let path = name.to_path_buf();
        return Ok(vec![if described { Source::Described(path) } else { Source::BareLog(path) }]);
    }
    let mut files = Vec::new();
    search(name, 0, &mut files)?;
    if files.is_empty() {
        return Err(Problem::new("there is no run.toml in this folder or below")
            .in_file(name)
            .remedy("name the log itself, or start a run.toml with `burntally new`"));
    }
    Ok(files.into_iter().map(Source::Described).collect())
}

/// Collects the run.toml of a folder, or those of the folders below it. Hidden folders and links to folders are left
/// out: the former are not a person's runs, the latter may lead in circles.
fn search(folder: &Path, depth: usize, files: &mut Vec<PathBuf>) -> Result<(), Problem> {
    let own = folder.join(RUN_FILE);
    if own.is_file() {
        files.push(own);
        return Ok(());
    }
    if depth == DEEPEST {
        return Ok(());
    }
    let mut below: Vec<PathBuf> = Vec::new();
    for entry in fs::read_dir(folder).map_err(|error| unreadable(folder, &error))? {
        let entry = entry.map_err(|error| unreadable(folder, &error))?;
        let hidden = entry.file_name().as_encoded_bytes().first() == Some(&b'.');
        if !hidden && entry.file_type().is_ok_and(|kind| kind.is_dir()) {
            below.push(entry.path());
        }
    }
    below.sort();
    below.iter().try_for_each(|folder| search(folder, depth + 1, files))
}

/// What is wrong with a file that cannot be opened.
pub fn unreadable(path: &Path, error: &io::Error) -> Problem {
    let problem = Problem::new(match error.kind() {
        io::ErrorKind::NotFound => "there is no such file or folder".to_owned(),
        io::ErrorKind::PermissionDenied => "no permission to read this".to_owned(),
        _ => format!("this cannot be read: {error}"),
    });
    problem.in_file(path).remedy("look at the spelling of the path, and at the permissions")
}

#[cfg(test)]
mod tests {
    use super::*;

    fn tree() -> tempfile::TempDir {
        let dir = tempfile::tempdir().unwrap();
        for folder in ["b/two", "a", "a/nested", ".hidden", "empty"] {
            fs::create_dir_all(dir.path().join(folder)).unwrap();
        }
        for file in ["b/two/run.toml", "a/run.toml", "a/nested/run.toml", ".hidden/run.toml", "log.csv"] {
            fs::write(dir.path().join(file), "").unwrap();
        }
        dir
    }

    #[test]
    fn folders_are_searched_in_order_and_hidden_ones_left_out() {
        let dir = tree();
        let found: Vec<Source> = find(&[dir.path().to_path_buf()]).into_iter().map(Result::unwrap).collect();
        let expected = ["a/run.toml", "b/two/run.toml"].map(|file| Source::Described(dir.path().join(file)));
        assert_eq!(found, expected);
    }

    #[test]
    fn files_logs_and_what_is_not_there() {
        let dir = tree();
        let names = ["a/run.toml", "log.csv", "gone", "empty", "a"].map(|name| dir.path().join(name));
        let found = find(&names);
        assert_eq!(found.len(), 4, "a/run.toml is reached twice and taken once");
        assert_eq!(found[0].as_ref().unwrap(), &Source::Described(names[0].clone()));
        assert_eq!(found[1].as_ref().unwrap(), &Source::BareLog(names[1].clone()));
        assert!(found[2].as_ref().unwrap_err().found.contains("no such file"));
        assert!(found[3].as_ref().unwrap_err().found.contains("no run.toml"));
    }

    #[cfg(unix)]
    #[test]
    fn links_that_lead_in_circles_are_not_followed() {
        let dir = tree();
        std::os::unix::fs::symlink(dir.path(), dir.path().join("b/back")).unwrap();
        assert_eq!(find(&[dir.path().to_path_buf()]).len(), 2);
    }
}
