//! Two COPY statements of one job that write to the same place.
//!
//! A COPY replaces what its target held, so the second would silently undo the first, and a target inside
//! another one would make the outer folder one that cannot be replaced. Both are slips in the job, found before
//! anything runs.

use std::path::{Component, Path, PathBuf};

use super::target::local_path;
use crate::errors;
use crate::exit::{Failure, Outcome};
use crate::statements::JobStatement;
use crate::stores::RemotePlace;

/// Where a COPY writes.
enum Place {
    Local(PathBuf),
    Remote(RemotePlace),
}

impl Place {
    fn of(target: &str) -> Outcome<Self> {
        if let Some(path) = local_path(target)? {
            return Ok(Self::Local(without_dots(&path)));
        }
        let remote = RemotePlace::parse(target).map_err(|error| errors::failure(&error))?;
        Ok(remote.map_or_else(|| Self::Local(PathBuf::from(target)), Self::Remote))
    }

    /// Whether `other` is this place or lies in it.
    fn holds(&self, other: &Self) -> bool {
        match (self, other) {
            (Self::Local(a), Self::Local(b)) => b.starts_with(a),
            (Self::Remote(a), Self::Remote(b)) => a.holds(b),
            _ => false,
        }
    }
}

/// Refuses a job two of whose COPY targets are the same or lie one inside the other.
///
/// # Errors
/// Names both statements and what to do; also for a target that is no place at all.
pub(crate) fn refuse_conflicts(statements: &[JobStatement]) -> Outcome<()> {
    let mut targets: Vec<(Place, &JobStatement, &str)> = Vec::new();
    for statement in statements {
        let Some(copy) = statement.copy() else { continue };
        let place = Place::of(&copy.target).map_err(|failure| failure.at(statement.place))?;
        for (earlier, other, named) in &targets {
            let remedy = match (earlier.holds(&place), place.holds(earlier)) {
                (true, true) => {
                    "the later would replace the rows of the earlier; write both in one COPY with UNION ALL, or to \
                     different places"
                }
                (false, false) => continue,
                _ => {
                    "one lies inside the other, and a COPY has its folder to itself; write to folders side by side"
                }
            };
            return Err(Failure::failed(format!(
                "writes to '{}', and {} writes to '{named}': {remedy}",
                copy.target, other.place
            ))
            .at(statement.place));
        }
        targets.push((place, statement, &copy.target));
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
    fn places_in_a_store_are_compared_too() {
        assert_eq!(verdict("COPY a TO 's3://w/a/'; COPY b TO 's3://w/ab/'; COPY c TO 's3://v/a/'"), Ok(()));
        let told = verdict("COPY a TO 's3://w/a'; COPY b TO 's3://w/a/'").expect_err("same place");
        assert!(told.contains("UNION ALL"), "{told}");
        assert!(verdict("COPY a TO 's4://w/a/'").expect_err("no such store").contains("statement 1"));
    }

    #[test]
    fn a_place_inside_another_is_refused() {
        let told = verdict("COPY a TO 'out/a.parquet'; COPY b TO 'out'").expect_err("inside");
        assert!(told.contains("inside the other"), "{told}");
    }
}
