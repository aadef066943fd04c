//! The operator of the physical plan.
//!
//! It asks for its input partitioned by key and sorted by key and time; the optimizer then adds the hash
//! repartition and a sort that can spill, unless the files lie in that order (see [`in_order`]). It declares what it keeps: the partitioning, the order and
//! whatever else is known about the key columns (`WHERE region = 'North'` makes that key a constant, and a
//! sort above that counts on it must find it).

use std::fmt;
use std::sync::atomic::AtomicBool;
use std::sync::{Arc, Mutex};

use datafusion::common::tree_node::TreeNodeRecursion;
use datafusion::error::{DataFusionError, Result};
use datafusion::execution::memory_pool::MemoryConsumer;
use datafusion::execution::{SendableRecordBatchStream, TaskContext};
use datafusion::physical_expr::equivalence::ProjectionMapping;
use datafusion::physical_expr::expressions::Column;
use datafusion::physical_expr::{
    Distribution, LexOrdering, LexRequirement, OrderingRequirements, Partitioning, PhysicalExpr,
    PhysicalSortExpr, PhysicalSortRequirement,
};
use datafusion::physical_plan::execution_plan::EmissionType;
use datafusion::physical_plan::metrics::{ExecutionPlanMetricsSet, MetricsSet};
use datafusion::physical_plan::{
    ChildrenPropertiesMode, DisplayAs, DisplayFormatType, ExecutionPlan, ExecutionPlanProperties,
    InputDistributionRequirements, PlanProperties, ReplaceChildrenOptions, apply_expression_roots,
};

use super::function::Function;
use super::in_order;
use super::in_place::InPlace;
use super::metrics::StructuralMetrics;
use super::progress::Progress;
use super::stream::{Positions, Setup, run};
use super::work::{Announcement, Job, Room, Workshop};
use crate::columns::groups::{Groups, ORDER};

/// Fits every series of its input and returns what the function asks for.
#[derive(Debug, Clone)]
pub(crate) struct StructuralExec {
    job: Arc<Job>,
    positions: Positions,
    /// The call in a line, for EXPLAIN.
    description: String,
    input: Arc<dyn ExecutionPlan>,
    /// Key columns of the input.
    keys: Vec<Arc<dyn PhysicalExpr>>,
    /// Time column of the input.
    at: Arc<dyn PhysicalExpr>,
    /// The input lies in one stream in the order of the series and is to stay so.
    in_order: bool,
    properties: Arc<PlanProperties>,
    metrics: ExecutionPlanMetricsSet,
    /// One of the partitions has told the host how many rows there are.
    announced: Arc<AtomicBool>,
}

impl StructuralExec {
    /// An operator over `input`, whose columns stand at `positions`.
    ///
    /// # Errors
    /// Positions beyond the input.
    pub(crate) fn try_new(
        job: Arc<Job>,
        positions: Positions,
        description: String,
        input: Arc<dyn ExecutionPlan>,
    ) -> Result<Self> {
        let plain = Self::over(job, positions, description, input, false)?;
        match plain.order().and_then(|order| in_order::arranged(&plain.input, &order)) {
            Some(input) => Self::over(plain.job, plain.positions, plain.description, input, true),
            None => Ok(plain),
        }
    }

    fn over(
        job: Arc<Job>,
        positions: Positions,
        description: String,
        input: Arc<dyn ExecutionPlan>,
        in_order: bool,
    ) -> Result<Self> {
        let schema = input.schema();
        let beyond =
            positions.keys.iter().chain(&positions.drivers).chain([&positions.at, &positions.observed]);
        if let Some(at) = beyond.copied().find(|&at| at >= schema.fields().len()) {
            return Err(DataFusionError::Internal(format!(
                "{}: the input has no column {at}",
                job.function.name()
            )));
        }
        let column =
            |&at: &usize| Arc::new(Column::new(schema.field(at).name(), at)) as Arc<dyn PhysicalExpr>;
        let keys = positions.keys.iter().map(column).collect::<Vec<_>>();
        let at = column(&positions.at);
        let properties = Arc::new(properties(&job, &positions, &input)?);
        Ok(Self {
            job,
            positions,
            description,
            input,
            keys,
            at,
            in_order,
            properties,
            metrics: ExecutionPlanMetricsSet::new(),
            announced: Arc::default(),
        })
    }

    /// The order in which the rows must arrive.
    fn order(&self) -> Option<LexRequirement> {
        let columns = self.keys.iter().chain([&self.at]);
        LexRequirement::new(
            columns.map(|column| PhysicalSortRequirement::new(Arc::clone(column), Some(ORDER))),
        )
    }
}

/// What is known of the output.
fn properties(job: &Job, positions: &Positions, input: &Arc<dyn ExecutionPlan>) -> Result<PlanProperties> {
    let schema = Arc::clone(job.result.schema());
    let mapping = ProjectionMapping::from_indices(&positions.keys, &input.schema())?;
    let mut equivalences = input.equivalence_properties().project(&mapping, Arc::clone(&schema));
    let sorted = |(at, name): (usize, &str)| PhysicalSortExpr::new(Arc::new(Column::new(name, at)), ORDER);
    let keys = schema.fields().iter().take(positions.keys.len()).map(|field| field.name().as_str());
    let mut order = keys.enumerate().map(sorted).collect::<Vec<_>>();
    if job.function != Function::Diagnostics {
        order.push(sorted((positions.keys.len(), "at")));
    }
    if let Some(order) = LexOrdering::new(order) {
        equivalences.add_ordering(order);
    }
    let partitioning = match positions.keys.is_empty() {
        true => Partitioning::UnknownPartitioning(1),
        false => input.output_partitioning().project(&mapping, input.equivalence_properties()),
    };
    Ok(PlanProperties::new(equivalences, partitioning, EmissionType::Incremental, input.boundedness()))
}

impl DisplayAs for StructuralExec {
    fn fmt_as(&self, format: DisplayFormatType, f: &mut fmt::Formatter<'_>) -> fmt::Result {
        match format {
            DisplayFormatType::Default | DisplayFormatType::Verbose => {
                write!(f, "{}: {}", self.name(), self.description)
            }
            DisplayFormatType::TreeRender => write!(f, "{}", self.description),
        }
    }
}

impl ExecutionPlan for StructuralExec {
    fn name(&self) -> &str {
        self.job.function.operator_name()
    }

    fn properties(&self) -> &Arc<PlanProperties> {
        &self.properties
    }

    fn children(&self) -> Vec<&Arc<dyn ExecutionPlan>> {
        vec![&self.input]
    }

    fn input_distribution_requirements(&self) -> InputDistributionRequirements {
        InputDistributionRequirements::new(vec![match self.keys.is_empty() || self.in_order {
            true => Distribution::SinglePartition,
            false => Distribution::KeyPartitioned(self.keys.clone()),
        }])
    }

    fn required_input_ordering(&self) -> Vec<Option<OrderingRequirements>> {
        vec![self.order().map(OrderingRequirements::new)]
    }

    fn apply_expressions(
        &self,
        f: &mut dyn FnMut(&Arc<dyn PhysicalExpr>) -> Result<TreeNodeRecursion>,
    ) -> Result<TreeNodeRecursion> {
        apply_expression_roots(self.keys.iter().chain([&self.at]), f)
    }

    fn replace_children(
        self: Arc<Self>,
        mut children: Vec<Arc<dyn ExecutionPlan>>,
        options: ReplaceChildrenOptions,
    ) -> Result<Arc<dyn ExecutionPlan>> {
        let (Some(input), true) = (children.pop(), children.is_empty()) else {
            return Err(DataFusionError::Internal(format!("{}: needs exactly one input", self.name())));
        };
        match options.children_properties {
            ChildrenPropertiesMode::Keep => {
                let metrics = ExecutionPlanMetricsSet::new();
                Ok(Arc::new(Self { input, metrics, announced: Arc::default(), ..Self::clone(&self) }))
            }
            ChildrenPropertiesMode::Recompute => Ok(Arc::new(Self::over(
                Arc::clone(&self.job),
                self.positions.clone(),
                self.description.clone(),
                input,
                self.in_order,
            )?)),
        }
    }

    // Deprecated in the engine, and yet a required method of its trait.
    fn with_new_children(
        self: Arc<Self>,
        children: Vec<Arc<dyn ExecutionPlan>>,
    ) -> Result<Arc<dyn ExecutionPlan>> {
        self.replace_children(children, ReplaceChildrenOptions::new(ChildrenPropertiesMode::Recompute))
    }

    fn execute(&self, partition: usize, context: Arc<TaskContext>) -> Result<SendableRecordBatchStream> {
        let schema = self.input.schema();
        let key_types = self.positions.keys.iter().map(|&at| schema.field(at).data_type().clone());
        let groups = Groups::try_new(&key_types.collect::<Vec<_>>())?;
        let config = context.session_config();
        let partitions = self.properties.partitioning.partition_count();
        let workshop = Arc::new(Workshop {
            job: Arc::clone(&self.job),
            metrics: StructuralMetrics::new(&self.metrics, partition),
            progress: config.get_extension::<Progress>(),
            cancelled: Arc::default(),
            announcement: Announcement { input: Arc::clone(&self.input), done: Arc::clone(&self.announced) },
            room: Room::of(context.memory_pool().as_ref(), config.target_partitions().max(partitions)),
            spare: Mutex::new(Vec::new()),
        });
        let memory =
            MemoryConsumer::new(format!("{}[{partition}]", self.name())).register(context.memory_pool());
        let setup = Setup {
            positions: self.positions.clone(),
            groups,
            workshop,
            memory,
            workers: (config.target_partitions() / partitions.max(1)).max(1),
            batch_size: config.batch_size(),
            in_place: config.get_extension::<InPlace>().is_some(),
        };
        Ok(run(self.input.execute(partition, context)?, setup))
    }

    fn metrics(&self) -> Option<MetricsSet> {
        Some(self.metrics.clone_inner())
    }
}
