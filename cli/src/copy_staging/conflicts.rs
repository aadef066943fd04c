//! Two COPY statements of one job that write to the same place.
//!
//! A COPY replaces what its target held, so the second would silently undo the first, and a target inside
//! another one would make the outer folder one that cannot be replaced. Both are slips in the job, found before
//! anything runs.

use std::path::{Component, Path, PathBuf};

use super::target::local_path;
use crate::exit::{Failure, Outcome};
use crate::statements::JobStatement;

/// Refuses a job two of whose COPY targets are the same or lie one inside the other.
pub(crate) fn refuse_conflicts(statements: &[JobStatement]) -> Outcome<()> {
    let mut targets: Vec<(PathBuf, &JobStatement, &str)> = Vec::new();
    for statement in statements {
        let Some(copy) = statement.copy() else { continue };
        let Some(path) = local_path(&copy.target).map_err(|failure| failure.at(statement.place))? else {
            continue;
        };
        let path = without_dots(&path);
        for (earlier, other, named) in &targets {
            let remedy = if path == *earlier {
                "the later would replace the rows of the earlier; write both in one COPY with UNION ALL, or to \
                 different places"
            } else if path.starts_with(earlier) || earlier.starts_with(&path) {
                "one lies inside the other, and a COPY replaces its folder whole; write to folders side by side"
            } else {
                continue;
            };
            return Err(Failure::failed(format!(
                "writes to '{}', and {} writes to '{named}': {remedy}",
                copy.target, other.place
            ))
            .at(statement.place));
        }
        targets.push((path, statement, &copy.target));
    }
    Ok(())
}

/// `a/./b/../c` -> `a/c`, by the letters of the path alone.
fn without_dots(path: &Path) -> PathBuf {
    let mut plain = PathBuf::new();
    for part in path.components() {
        match part {
            Component::CurDir => {}
            Component::ParentDir => {
                plain.pop();
            }
            other => plain.push(other),
        }
    }
    plain
}

#[cfg(test)]
mod tests {
    use super::*;
    use crate::statements::parse;

    fn verdict(sql: &str) -> Result<(), String> {
        refuse_conflicts(&parse(sql).expect("parses")).map_err(|failure| failure.message)
    }

    #[test]
    fn places_side_by_side_are_fine() {
        assert_eq!(verdict("COPY a TO 'out/a/'; COPY b TO 'out/ab/'; COPY c TO 's3://out/a/'"), Ok(()));
    }

    #[test]
    fn the_same_place_twice_is_refused() {
        let told = verdict("COPY a TO 'out/a/';\nCOPY b TO 'out/b/../a'").expect_err("same place");
        assert!(told.starts_with("statement 2 (line 2): writes to 'out/b/../a', and statement 1"), "{told}");
        assert!(told.contains("UNION ALL"), "{told}");
    }

    #[test]
    fn a_place_inside_another_is_refused() {
        let told = verdict("COPY a TO 'out/a.parquet'; COPY b TO 'out'").expect_err("inside");
        assert!(told.contains("inside the other"), "{told}");
    }
}
