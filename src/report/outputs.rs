//! All files of a reduced firing, in memory, ready to be written together.

use super::units::Units;
use super::{page, plot};
use crate::export::files::OutputFile;
use crate::export::{json, thrust_table};
use crate::firing::Firing;
use crate::problem::Problem;
use crate::reduce::Reduction;

pub const RESULT_FILE: &str = "result.json";

/// Every file a run's folder may hold, result.json first.
pub const FILES: [&str; 6] =
    [RESULT_FILE, thrust_table::FILE, thrust_table::METADATA_FILE, plot::SVG_FILE, plot::PNG_FILE, page::FILE];

/// What is wanted of the files.
#[derive(Debug, Clone, Copy, PartialEq, Eq)]
pub struct Wanted {
    /// Units of pictures and page; the other files are SI.
    pub units: Units,
    /// Pictures and the page that holds one.
    pub pictures: bool,
    /// Most rows of the thrust table.
    pub table_rows: usize,
}

impl Default for Wanted {
    fn default() -> Self {
        Wanted { units: Units::Si, pictures: true, table_rows: thrust_table::DEFAULT_ROWS }
    }
}

/// Makes the files of a firing.
///
/// # Errors
/// A figure that is not finite, a curve that has no table or picture.
pub fn outputs(reduction: &Reduction, wanted: Wanted) -> Result<Vec<OutputFile>, Problem> {
    let (firing, curves) = (&reduction.firing, &reduction.curves);
    if !wanted.pictures {
        return numbers(reduction, wanted);
    }
    let svg = plot::thrust_svg(firing, curves, wanted.units)?;
    // Drawing the pixels takes the longest by far; the rest is done beside it.
    let (png, rest) = rayon::join(
        || plot::png(&svg),
        || Ok::<_, Problem>((numbers(reduction, wanted)?, page::page(firing, Some(&svg), wanted.units)?)),
    );
    let (mut files, page) = rest?;
    files.push(OutputFile::new(plot::PNG_FILE, png?));
    files.push(OutputFile::new(page::FILE, page));
    files.push(OutputFile::new(plot::SVG_FILE, svg));
    Ok(files)
}

fn numbers(reduction: &Reduction, wanted: Wanted) -> Result<Vec<OutputFile>, Problem> {
    let firing: &Firing = &reduction.firing;
    let table = thrust_table::thrust_table(firing, &reduction.curves, wanted.table_rows)?;
    Ok(vec![
        OutputFile::new(RESULT_FILE, json::pretty(firing)?),
        OutputFile::new(thrust_table::FILE, thrust_table::to_csv(&table)?),
        OutputFile::new(thrust_table::METADATA_FILE, thrust_table::metadata(firing)?),
    ])
}

#[cfg(test)]
mod tests {
    use super::*;
    use crate::export::sample;

    #[test]
    fn all_files_are_made_or_only_the_numbers() {
        let reduction = Reduction { firing: sample::firing(), curves: sample::curves(3_000) };
        let started = std::time::Instant::now();
        let files = outputs(&reduction, Wanted::default()).unwrap();
        println!("outputs took {:?}", started.elapsed());
        let mut names: Vec<&str> = files.iter().map(|file| file.name).collect();
        assert_eq!(names[0], RESULT_FILE, "it is placed last, so it must be first of the set");
        names.sort_unstable();
        let mut all = FILES;
        all.sort_unstable();
        assert_eq!(names, all);
        let few = outputs(&reduction, Wanted { pictures: false, ..Wanted::default() }).unwrap();
        assert_eq!(few, files[..3]);
    }
}
