//! The functions in a session: what can be asked, what is pushed down, what is said about mistakes and
//! about bad series, and that the answer does not depend on threads, partitions or the order of rows.

mod arguments;
mod calls;
mod inputs;
mod operator;
mod plans;
mod registration;
mod reproducible;
mod support;
mod troubles;
