//! A cycle with its mesh, and a direction on it.

use std::sync::Arc;

use armilla_collocation::{Iterate, Row, Tables, interpolate_nodes};
use armilla_record::{MeshReason, Profile, Reached};

/// A cycle: unknowns on a mesh.
#[derive(Clone, Debug, PartialEq)]
pub struct CyclePoint {
    /// Degree of the pieces.
    pub degree: usize,
    /// N+1 mesh points.
    pub mesh: Arc<[f64]>,
    /// Node values, period, parameter.
    pub unknowns: Iterate,
    /// Why it has this degree and mesh.
    pub choice: MeshReason,
    /// What keeps it from the accuracy, should it miss it.
    pub reached: Reached,
}

/// A direction in the space of the unknowns.
#[derive(Clone, Debug, PartialEq)]
pub struct CycleTangent {
    /// Degree of the pieces.
    pub degree: usize,
    /// N+1 mesh points.
    pub mesh: Arc<[f64]>,
    /// The direction.
    pub row: Row,
}

impl CyclePoint {
    /// From a profile, its degree within [`armilla_collocation::DEGREES`].
    pub fn from_profile(profile: &Profile, parameter: f64) -> Self {
        let unknowns = Iterate { nodes: profile.values.clone(), period: profile.period, parameter };
        let (choice, reached) = (MeshReason::Start, Reached::Accuracy);
        Self { degree: profile.degree, mesh: profile.mesh.clone().into(), unknowns, choice, reached }
    }

    /// As a profile.
    pub fn profile(&self) -> Profile {
        let intervals = self.mesh.len() - 1;
        Profile {
            n_states: self.unknowns.nodes.len() / (intervals * self.degree + 1),
            degree: self.degree,
            period: self.unknowns.period,
            mesh: self.mesh.to_vec(),
            values: self.unknowns.nodes.clone(),
        }
    }

    /// Basis tables of its degree.
    pub(crate) fn tables(&self) -> &'static Tables {
        Tables::of(self.degree)
    }

    /// Number of mesh intervals.
    pub fn intervals(&self) -> usize {
        self.mesh.len() - 1
    }

    /// The same cycle on another mesh, with pieces of another degree.
    pub(crate) fn on_mesh(&self, degree: usize, mesh: &Arc<[f64]>) -> Self {
        let nodes = carry((self.degree, &self.mesh), &self.unknowns.nodes, (degree, mesh));
        let unknowns = Iterate { nodes, period: self.unknowns.period, parameter: self.unknowns.parameter };
        Self { degree, mesh: mesh.clone(), unknowns, choice: self.choice, reached: self.reached }
    }
}

impl CycleTangent {
    /// The same direction on another mesh, with pieces of another degree.
    pub(crate) fn on_mesh(&self, degree: usize, mesh: &Arc<[f64]>) -> Self {
        let nodes = carry((self.degree, &self.mesh), &self.row.nodes, (degree, mesh));
        Self { degree, mesh: mesh.clone(), row: Row { nodes, ..self.row.clone() } }
    }
}

fn carry((degree, from): (usize, &Arc<[f64]>), nodes: &[f64], (new_degree, to): (usize, &Arc<[f64]>)) -> Vec<f64> {
    if degree == new_degree && (Arc::ptr_eq(from, to) || from == to) {
        return nodes.to_vec();
    }
    let n = nodes.len() / ((from.len() - 1) * degree + 1);
    interpolate_nodes((Tables::of(degree), from), nodes, (Tables::of(new_degree), to), n)
}
