//! The names of the files in a folder.
//!
//! The engine names the files of a folder by a random word of its own (`w3K…_0.parquet`), so that two writers
//! never meet. A staged folder has one writer; its files are called `part-0.parquet`, `part-1.parquet` …, in the
//! order they were opened, and a job that runs again writes the same names again.

use std::fs;
use std::io;
use std::path::Path;

/// Renames the files at every depth below `folder`.
pub(super) fn settle(folder: &Path) -> io::Result<()> {
    let mut files = Vec::new();
    for entry in fs::read_dir(folder)? {
        let entry = entry?;
        if entry.file_type()?.is_dir() {
            settle(&entry.path())?;
        } else {
            files.push(entry.file_name().to_string_lossy().into_owned());
        }
    }
    files.sort_by(|a, b| opened(a).cmp(&opened(b)).then_with(|| a.cmp(b)));
    for (number, name) in files.iter().enumerate() {
        let ending = name.split_once('.').map(|(_, ending)| format!(".{ending}")).unwrap_or_default();
        fs::rename(folder.join(name), folder.join(format!("part-{number}{ending}")))?;
    }
    Ok(())
}

/// The number the engine appends to its word: `w3K…_12.parquet` -> 12. Files of a partition have none.
fn opened(name: &str) -> u64 {
    let stem = name.split_once('.').map_or(name, |(stem, _)| stem);
    stem.rsplit_once('_').and_then(|(_, number)| number.parse().ok()).unwrap_or(0)
}

#[cfg(test)]
mod tests {
    use super::*;

    #[test]
    fn names_follow_the_order_of_opening() {
        let folder = tempfile::tempdir().expect("folder");
        fs::create_dir(folder.path().join("region=North")).expect("made");
        for name in ["qX_10.csv.gz", "qX_2.csv.gz", "region=North/qX.csv.gz"] {
            fs::write(folder.path().join(name), name).expect("written");
        }
        settle(folder.path()).expect("settled");
        let read = |name: &str| fs::read_to_string(folder.path().join(name)).expect(name);
        assert_eq!(read("part-0.csv.gz"), "qX_2.csv.gz");
        assert_eq!(read("part-1.csv.gz"), "qX_10.csv.gz");
        assert_eq!(read("region=North/part-0.csv.gz"), "region=North/qX.csv.gz");
    }
}
