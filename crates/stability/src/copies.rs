//! How far a cycle is from being a shorter one told several times.

use crate::point::CyclePoint;
use crate::problem::CycleProblem;

impl CycleProblem {
    /// Size, in the metric, of the difference between a cycle and itself shifted by one part in `copies` of its period: 0
    /// where it is a shorter cycle told that often.
    pub fn unlike_copies(&self, point: &CyclePoint, copies: usize) -> f64 {
        let nodes = self.shift_nodes(point, copies);
        self.metric.nodes_inner(point.tables(), &point.mesh, &nodes, &nodes).sqrt()
    }

    /// Half the difference between each node value and the cycle one part in `copies` of the period later.
    pub(crate) fn shift_nodes(&self, point: &CyclePoint, copies: usize) -> Vec<f64> {
        let profile = self.profile(point);
        let mut evaluator = profile.evaluator();
        let mut shifted = vec![0.0; profile.n_states];
        let mut nodes = Vec::with_capacity(profile.values.len());
        for (node, time) in profile.node_times().iter().enumerate() {
            evaluator.at(time + 1.0 / copies as f64, &mut shifted);
            nodes.extend(profile.node(node).iter().zip(&shifted).map(|(a, b)| 0.5 * (a - b)));
        }
        nodes
    }
}
