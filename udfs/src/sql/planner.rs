//! From the logical node to the operator.

use std::sync::Arc;

use async_trait::async_trait;
use datafusion::catalog::Session;
use datafusion::common::{Column, DFSchema};
use datafusion::error::{DataFusionError, Result};
use datafusion::execution::context::QueryPlanner;
use datafusion::logical_expr::physical_planning_context::PhysicalPlanningContext;
use datafusion::logical_expr::{LogicalPlan, UserDefinedLogicalNode};
use datafusion::physical_plan::ExecutionPlan;
use datafusion::physical_plan::filter::FilterExec;
use datafusion::physical_planner::{DefaultPhysicalPlanner, ExtensionPlanner, PhysicalPlanner};

use super::node::StructuralNode;
use super::operator::StructuralExec;
use super::stream::Positions;
use super::work::Job;
use crate::columns::time::TimeKind;

/// Plans the nodes of this crate. A host with a query planner of its own adds this to it.
#[derive(Debug, Clone, Copy, Default)]
pub struct StructuralExtensionPlanner;

#[async_trait]
impl ExtensionPlanner for StructuralExtensionPlanner {
    async fn plan_extension(
        &self,
        planner: &dyn PhysicalPlanner,
        node: &dyn UserDefinedLogicalNode,
        logical_inputs: &[&LogicalPlan],
        physical_inputs: &[Arc<dyn ExecutionPlan>],
        session: &dyn Session,
        context: &PhysicalPlanningContext,
    ) -> Result<Option<Arc<dyn ExecutionPlan>>> {
        let Some(node) = node.as_any().downcast_ref::<StructuralNode>() else { return Ok(None) };
        let ([logical], [input]) = (logical_inputs, physical_inputs) else {
            return Err(DataFusionError::Internal(format!(
                "{}: needs exactly one input",
                node.function().name()
            )));
        };
        let mut plan: Arc<dyn ExecutionPlan> = Arc::new(operator(node, logical.schema(), Arc::clone(input))?);
        for condition in node.kept() {
            let condition = planner.create_physical_expr(condition, node.schema(), session, context)?;
            plan = Arc::new(FilterExec::try_new(condition, plan)?);
        }
        Ok(Some(plan))
    }
}

/// The operator of a node over an input with this schema.
fn operator(
    node: &StructuralNode,
    schema: &DFSchema,
    input: Arc<dyn ExecutionPlan>,
) -> Result<StructuralExec> {
    let roles = node.roles();
    let at = |column: &Column| schema.index_of_column(column);
    let positions = Positions {
        keys: roles.keys.iter().map(at).collect::<Result<_>>()?,
        at: at(&roles.at)?,
        observed: at(&roles.observed)?,
        drivers: roles
            .drivers
            .iter()
            .chain(&roles.drifting_drivers)
            .map(|driver| at(&driver.column))
            .collect::<Result<_>>()?,
    };
    let time = TimeKind::try_new(schema.field(positions.at).data_type())
        .map_err(|error| super::error::bad_argument(node.function(), "at", error.to_string()))?;
    let job = Job {
        function: node.function(),
        settings: node.settings()?,
        time,
        key_names: roles.keys.iter().map(|key| key.name.clone()).collect(),
        result: Arc::clone(node.result()),
    };
    StructuralExec::try_new(Arc::new(job), positions, node.describe(), input)
}

/// The engine's own planner together with [`StructuralExtensionPlanner`].
#[derive(Debug, Clone, Copy, Default)]
pub struct StructuralQueryPlanner;

#[async_trait]
impl QueryPlanner for StructuralQueryPlanner {
    async fn create_physical_plan(
        &self,
        logical_plan: &LogicalPlan,
        session: &dyn Session,
    ) -> Result<Arc<dyn ExecutionPlan>> {
        DefaultPhysicalPlanner::with_extension_planners(vec![Arc::new(StructuralExtensionPlanner)])
            .create_physical_plan(logical_plan, session)
            .await
    }
}
