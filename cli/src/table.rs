//! A result as a table to read: its first rows, and on a terminal as many columns as fit.

use arrow::array::RecordBatch;
use arrow::datatypes::SchemaRef;
use arrow::error::ArrowError;
use arrow::util::display::FormatOptions;
use arrow::util::pretty::pretty_format_batches_with_options;

use crate::amounts;
use crate::exit::{Failure, Outcome};

/// How more rows of a table are to be had, on the command line.
pub(crate) const MORE: &str = "--rows N shows more, --rows 0 all";

/// Collects the first rows of a result and counts the others.
#[derive(Debug)]
pub(crate) struct Table {
    schema: SchemaRef,
    first: Vec<RecordBatch>,
    kept: usize,
    most: usize,
    rows: u64,
}

impl Table {
    /// A table of at most `most` rows; 0 = all of them.
    pub(crate) fn new(schema: SchemaRef, most: usize) -> Self {
        let most = if most == 0 { usize::MAX } else { most };
        Self { schema, first: Vec::new(), kept: 0, most, rows: 0 }
    }

    /// Takes the next rows of the result.
    pub(crate) fn push(&mut self, batch: &RecordBatch) {
        self.rows += batch.num_rows() as u64;
        let wanted = batch.num_rows().min(self.most - self.kept);
        if wanted > 0 {
            self.first.push(batch.slice(0, wanted));
            self.kept += wanted;
        }
    }

    /// Rows of the result, shown or not.
    pub(crate) fn rows(&self) -> u64 {
        self.rows
    }

    /// The table as text, ending with a line break. `width`: columns of the terminal, if it is one. `more`: how the rows
    /// that are not shown can be had.
    ///
    /// # Errors
    /// When a value cannot be written as text.
    pub(crate) fn render(&self, width: Option<usize>, more: &str) -> Outcome<String> {
        self.text(width, more).map_err(|error| Failure::failed(format!("cannot show the rows: {error}")))
    }

    fn text(&self, width: Option<usize>, more: &str) -> Result<String, ArrowError> {
        let mut shown = self.schema.fields().len();
        let mut text = self.draw(shown)?;
        while let Some(width) = width
            && shown > 1
            && text.lines().next().is_some_and(|frame| frame.chars().count() > width)
        {
            shown -= 1;
            text = self.draw(shown)?;
        }
        text.push('\n');
        if (self.kept as u64) < self.rows {
            text.push_str(&format!(
                "{} of {} rows; {more}\n",
                amounts::count(self.kept as u64),
                amounts::count(self.rows)
            ));
        }
        if shown < self.schema.fields().len() {
            let hidden: Vec<_> =
                self.schema.fields()[shown..].iter().map(|field| field.name().as_str()).collect();
            text.push_str(&format!("too wide for this terminal, not shown: {}\n", hidden.join(", ")));
        }
        Ok(text)
    }

    fn draw(&self, columns: usize) -> Result<String, ArrowError> {
        let columns: Vec<usize> = (0..columns).collect();
        let none = [RecordBatch::new_empty(SchemaRef::clone(&self.schema))];
        let rows = if self.first.is_empty() { &none } else { self.first.as_slice() };
        let rows = rows.iter().map(|batch| batch.project(&columns)).collect::<Result<Vec<_>, _>>()?;
        let options = FormatOptions::default().with_null("NULL").with_display_error(true);
        Ok(pretty_format_batches_with_options(&rows, &options)?.to_string())
    }
}

#[cfg(test)]
mod tests {
    use std::sync::Arc;

    use arrow::array::{ArrayRef, Int64Array};

    use super::*;

    fn batch(rows: i64) -> RecordBatch {
        let week: ArrayRef = Arc::new(Int64Array::from_iter_values(0..rows));
        let litres: ArrayRef = Arc::new(Int64Array::from(vec![None; rows as usize]));
        RecordBatch::try_from_iter([("week", week), ("litres", litres)]).expect("a batch")
    }

    fn table(most: usize) -> Table {
        let mut table = Table::new(batch(0).schema(), most);
        table.push(&batch(3));
        table.push(&batch(3));
        table
    }

    #[test]
    fn the_first_rows_are_shown_and_the_others_counted() {
        let text = table(4).render(None, MORE).expect("rendered");
        assert_eq!(text.matches("NULL").count(), 4);
        assert!(text.ends_with("4 of 6 rows; --rows N shows more, --rows 0 all\n"), "{text}");
    }

    #[test]
    fn zero_shows_all_rows() {
        let text = table(0).render(None, MORE).expect("rendered");
        assert_eq!((text.matches("NULL").count(), text.contains("--rows")), (6, false));
    }

    #[test]
    fn columns_that_do_not_fit_are_named() {
        let text = table(1).render(Some(10), MORE).expect("rendered");
        assert!(text.starts_with("+------+\n"), "{text}");
        assert!(text.ends_with("not shown: litres\n"), "{text}");
    }

    #[test]
    fn an_empty_result_still_shows_its_columns() {
        let text = Table::new(batch(0).schema(), 5).render(None, MORE).expect("rendered");
        assert!(text.contains("| week | litres |"), "{text}");
    }
}
