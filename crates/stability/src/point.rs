//! A cycle with its mesh, and a direction on it.

use std::sync::Arc;

use armilla_collocation::{Iterate, Row, Tables, interpolate_nodes};
use armilla_record::Profile;

/// A cycle: unknowns on a mesh. The degree is that of the problem it belongs to.
#[derive(Clone, Debug, PartialEq)]
pub struct CyclePoint {
    /// N+1 mesh points.
    pub mesh: Arc<[f64]>,
    /// Node values, period, parameter.
    pub unknowns: Iterate,
}

/// A direction in the space of the unknowns.
#[derive(Clone, Debug, PartialEq)]
pub struct CycleTangent {
    /// N+1 mesh points.
    pub mesh: Arc<[f64]>,
    /// The direction.
    pub row: Row,
}

impl CyclePoint {
    /// From a profile of the same degree.
    pub fn from_profile(profile: &Profile, parameter: f64) -> Self {
        let unknowns = Iterate { nodes: profile.values.clone(), period: profile.period, parameter };
        Self { mesh: profile.mesh.clone().into(), unknowns }
    }

    /// As a profile of degree `degree`.
    pub fn profile(&self, degree: usize) -> Profile {
        let intervals = self.mesh.len() - 1;
        Profile {
            n_states: self.unknowns.nodes.len() / (intervals * degree + 1),
            degree,
            period: self.unknowns.period,
            mesh: self.mesh.to_vec(),
            values: self.unknowns.nodes.clone(),
        }
    }

    /// The same cycle on another mesh.
    pub(crate) fn on_mesh(&self, tables: &Tables, mesh: &Arc<[f64]>) -> Self {
        let nodes = carry(tables, &self.mesh, &self.unknowns.nodes, mesh);
        Self { mesh: mesh.clone(), unknowns: Iterate { nodes, ..self.unknowns.clone() } }
    }
}

impl CycleTangent {
    /// The same direction on another mesh.
    pub(crate) fn on_mesh(&self, tables: &Tables, mesh: &Arc<[f64]>) -> Self {
        let nodes = carry(tables, &self.mesh, &self.row.nodes, mesh);
        Self { mesh: mesh.clone(), row: Row { nodes, ..self.row.clone() } }
    }
}

fn carry(tables: &Tables, from: &Arc<[f64]>, nodes: &[f64], to: &Arc<[f64]>) -> Vec<f64> {
    if Arc::ptr_eq(from, to) || from == to {
        return nodes.to_vec();
    }
    let n = nodes.len() / ((from.len() - 1) * tables.degree + 1);
    interpolate_nodes((tables, from), nodes, (tables, to), n)
}
