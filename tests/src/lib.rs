//! Nothing to link against: this package is its tests (`tests/all.rs`) and the SQL records in `slt/`.
