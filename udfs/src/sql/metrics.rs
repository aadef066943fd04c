//! What EXPLAIN ANALYZE shows of an operator.

use datafusion::physical_plan::metrics::{
    BaselineMetrics, Count, ExecutionPlanMetricsSet, MetricBuilder, Time,
};

/// The counters of one partition.
#[derive(Debug, Clone)]
pub(crate) struct StructuralMetrics {
    /// Rows, batches and time, as every operator has them.
    pub(crate) baseline: BaselineMetrics,
    /// Series that were fitted.
    pub(crate) series_fitted: Count,
    /// Series that could not be.
    pub(crate) series_in_trouble: Count,
    /// Evaluations of the likelihood, all fitted series together.
    pub(crate) likelihood_evaluations: Count,
    /// Time spent in estimation, smoothing and forecasting, all threads together.
    pub(crate) time_in_fits: Time,
}

impl StructuralMetrics {
    pub(crate) fn new(metrics: &ExecutionPlanMetricsSet, partition: usize) -> Self {
        let counter = |name: &'static str| MetricBuilder::new(metrics).counter(name, partition);
        Self {
            baseline: BaselineMetrics::new(metrics, partition),
            series_fitted: counter("series_fitted"),
            series_in_trouble: counter("series_in_trouble"),
            likelihood_evaluations: counter("likelihood_evaluations"),
            time_in_fits: MetricBuilder::new(metrics).subset_time("time_in_fits", partition),
        }
    }
}
