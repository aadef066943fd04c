//! The reference of the functions that stand in expressions, read off the documentation that each of them carries.

use datafusion::logical_expr::Documentation;

use crate::sql::registry;
use crate::sql::watch::Watch;

/// What kind of function it is.
#[derive(Debug, Clone, Copy, PartialEq, Eq, Hash)]
pub enum ValueFunctionKind {
    /// One value per row, from the values of that row.
    Scalar,
    /// One value per group.
    Aggregate,
    /// One value per row, from the rows of its partition.
    Window,
}

impl ValueFunctionKind {
    /// In a word.
    pub fn name(self) -> &'static str {
        match self {
            Self::Scalar => "scalar",
            Self::Aggregate => "aggregate",
            Self::Window => "window",
        }
    }
}

/// What there is to say about one function that stands in expressions. The texts are Markdown.
#[derive(Debug, Clone, PartialEq, Eq)]
pub struct ValueFunctionDoc {
    /// Name in SQL.
    pub name: String,
    /// Kind.
    pub kind: ValueFunctionKind,
    /// Heading of the functions it belongs to.
    pub section: &'static str,
    /// What holds for all of these, if anything is to be said.
    pub section_description: Option<&'static str>,
    /// What it gives, in a few sentences.
    pub description: String,
    /// How it is written; more than one way, if there is.
    pub syntax: Vec<String>,
    /// Names of its arguments and what they take.
    pub arguments: Vec<(String, String)>,
    /// A query that runs by itself or on a table `sales(region, product, week, litres, price, promo)`.
    pub example: String,
    /// Names of functions to look at as well.
    pub related: Vec<String>,
}

impl ValueFunctionDoc {
    fn new(name: &str, kind: ValueFunctionKind, documentation: &Documentation) -> Self {
        let others = documentation.alternative_syntax.iter().flatten();
        Self {
            name: name.to_string(),
            kind,
            section: documentation.doc_section.label,
            section_description: documentation.doc_section.description,
            description: documentation.description.clone(),
            syntax: [&documentation.syntax_example].into_iter().chain(others).cloned().collect(),
            arguments: documentation.arguments.clone().unwrap_or_default(),
            example: documentation.sql_example.clone().unwrap_or_default(),
            related: documentation.related_udfs.clone().unwrap_or_default(),
        }
    }

    /// The first sentence of its description.
    pub fn summary(&self) -> &str {
        self.description.find(". ").and_then(|at| self.description.get(..=at)).unwrap_or(&self.description)
    }
}

/// The documentation of all scalar, aggregate and window functions; those of one section stand together.
pub fn value_functions() -> Vec<ValueFunctionDoc> {
    let (scalars, aggregates, windows) = (
        registry::scalars(&Watch::default()),
        registry::aggregates(&Watch::default()),
        registry::windows(&Watch::default()),
    );
    let scalars = scalars.iter().map(|f| (f.name(), ValueFunctionKind::Scalar, f.documentation()));
    let aggregates = aggregates.iter().map(|f| (f.name(), ValueFunctionKind::Aggregate, f.documentation()));
    let windows = windows.iter().map(|f| (f.name(), ValueFunctionKind::Window, f.documentation()));
    let mut docs = aggregates
        .chain(scalars)
        .chain(windows)
        .filter_map(|(name, kind, documentation)| Some(ValueFunctionDoc::new(name, kind, documentation?)))
        .collect::<Vec<_>>();
    let sections = docs.iter().map(|doc| doc.section).collect::<Vec<_>>();
    docs.sort_by_key(|doc| sections.iter().position(|section| *section == doc.section));
    docs
}

#[cfg(test)]
mod tests {
    use super::*;

    #[test]
    fn every_function_says_all_there_is_to_say() {
        let docs = value_functions();
        let count = registry::scalars(&Watch::default()).len()
            + registry::aggregates(&Watch::default()).len()
            + registry::windows(&Watch::default()).len();
        assert_eq!(docs.len(), count, "a function has no documentation");
        for doc in docs {
            let name = &doc.name;
            assert!(doc.description.ends_with('.'), "{name}: the description is no sentence");
            assert!(
                doc.syntax.iter().all(|syntax| syntax.starts_with(&format!("{name}("))),
                "{name}: {:?}",
                doc.syntax
            );
            assert!(doc.example.contains(&format!("{name}(")), "{name}: the example does not call it");
            assert!(!doc.arguments.is_empty(), "{name}: no argument is described");
            for (argument, meaning) in &doc.arguments {
                assert!(doc.syntax[0].contains(argument.as_str()), "{name}: {argument} is not in the syntax");
                assert!(meaning.ends_with('.'), "{name}: what {argument} takes is no sentence");
            }
            for other in &doc.related {
                assert!(
                    value_functions().iter().any(|doc| doc.name == *other),
                    "{name}: there is no {other}"
                );
            }
        }
    }

    #[test]
    fn a_section_stands_together() {
        let docs = value_functions();
        let mut seen = Vec::new();
        for sections in docs.chunk_by(|a, b| a.section == b.section) {
            let section = sections[0].section;
            assert!(!seen.contains(&section), "{section} comes twice");
            let description = sections[0].section_description;
            assert!(sections.iter().all(|doc| doc.section_description == description), "{section}");
            seen.push(section);
        }
    }

    #[test]
    fn the_summary_is_one_sentence() {
        let doc = |description: &str| ValueFunctionDoc {
            description: description.to_string(),
            ..value_functions().pop().unwrap()
        };
        assert_eq!(doc("One. Two.").summary(), "One.");
        assert_eq!(doc("Only one.").summary(), "Only one.");
    }
}
