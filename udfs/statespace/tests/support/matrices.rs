//! Fits systems given as matrices, and compares paths.

use stillwell_statespace::{GeneralFit, GeneralForm, Series, Workspace};

pub(crate) const TOLERANCE: f64 = 1e-9;

pub(crate) fn run(form: &GeneralForm, series: &Series) -> GeneralFit {
    form.check().expect("matrices that fit together");
    form.fit(series, 0.9, &mut Workspace::new()).expect("a fit")
}

#[track_caller]
pub(crate) fn close(name: &str, ours: &[f64], other: &[f64], tolerance: f64) {
    assert_eq!(ours.len(), other.len(), "{name}");
    for (t, (a, b)) in ours.iter().zip(other).enumerate() {
        assert!((a - b).abs() <= tolerance * (1.0 + b.abs()), "{name} at {t}: {a} {b}");
    }
}
