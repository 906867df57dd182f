//! `export/<branch>.npz`: a branch as NumPy arrays in a zip container, stored without compression.
//!
//! Arrays of rows are in C order. Cycles have different numbers of nodes, so their nodes stand one after the
//! other and `orbit_first[k]..orbit_first[k + 1]` are the rows of cycle k. Numbers are 64-bit,
//! little-endian, so the bits are those of the branch file.

use std::io::{self, Cursor};
use std::path::Path;

use npyz::npz::NpzWriter;
use npyz::zip::write::FileOptions;
use npyz::zip::{CompressionMethod, DateTime};
use npyz::{AutoSerialize, DType, WriterBuilder};

use crate::atomic::write_atomic;
use crate::export::{Orbit, orbits};
use crate::{Branch, Multiplier, Point, RecordError};

/// Writes the points and cycles of a branch, atomically.
///
/// # Errors
/// What the machine refused.
pub(crate) fn write_arrays(path: &Path, branch: &Branch) -> Result<(), RecordError> {
    write_atomic(path, |out| {
        // A zip container needs to go back; the file is written front to back.
        let mut buffer = Cursor::new(Vec::new());
        let mut archive = Archive { npz: NpzWriter::new(&mut buffer) };
        names(&mut archive, branch)?;
        points(&mut archive, branch)?;
        cycles(&mut archive, branch)?;
        archive.npz.zip_writer().finish().map_err(io::Error::from)?;
        drop(archive);
        out.write_all(buffer.get_ref())
    })
}

struct Archive<'a> {
    npz: NpzWriter<&'a mut Cursor<Vec<u8>>>,
}

impl Archive<'_> {
    /// An array of numbers of the given shape.
    fn numbers<T: AutoSerialize + Copy>(&mut self, name: &str, shape: &[usize], values: &[T]) -> io::Result<()> {
        let shape: Vec<u64> = shape.iter().map(|length| *length as u64).collect();
        let array = self.npz.array::<T>(name, entry_options())?;
        let mut writer = array.default_dtype().shape(&shape).begin_nd()?;
        writer.extend(values.iter().copied())?;
        writer.finish()
    }

    /// One number of each item.
    fn column<T, V: AutoSerialize + Copy>(&mut self, name: &str, items: &[T], of: impl Fn(&T) -> V) -> io::Result<()> {
        let values: Vec<V> = items.iter().map(of).collect();
        self.numbers(name, &[items.len()], &values)
    }

    /// `width` numbers of each item.
    fn rows<T>(&mut self, name: &str, items: &[T], width: usize, of: impl Fn(&T) -> Vec<f64>) -> io::Result<()> {
        let values: Vec<f64> = items.iter().flat_map(of).collect();
        self.numbers(name, &[items.len(), width], &values)
    }

    /// An array of texts of fixed length, as NumPy has them.
    fn texts(&mut self, name: &str, texts: &[&str]) -> io::Result<()> {
        // NumPy takes no texts of length 0.
        let longest = texts.iter().map(|text| text.chars().count()).max().unwrap_or(0).max(1);
        let dtype = DType::Plain(format!("<U{longest}").parse().expect("a type of texts"));
        let array = self.npz.array::<str>(name, entry_options())?;
        let mut writer = array.dtype(dtype).shape(&[texts.len() as u64]).begin_nd()?;
        texts.iter().try_for_each(|text| writer.push(text))?;
        writer.finish()
    }
}

/// The time of an entry is the earliest a zip container knows: the same branch gives the same bytes.
fn entry_options() -> FileOptions {
    FileOptions::default().compression_method(CompressionMethod::Stored).last_modified_time(DateTime::default())
}

fn names(archive: &mut Archive<'_>, branch: &Branch) -> io::Result<()> {
    let states = |of: fn(&crate::Quantity) -> &str| branch.states.iter().map(of).collect::<Vec<_>>();
    archive.texts("branch_name", &[&branch.name])?;
    archive.texts("parameter_name", &[&branch.parameter.name])?;
    archive.texts("parameter_unit", &[&branch.parameter.unit])?;
    archive.texts("state_name", &states(|state| &state.name))?;
    archive.texts("state_unit", &states(|state| &state.unit))
}

fn points(archive: &mut Archive<'_>, branch: &Branch) -> io::Result<()> {
    let (points, n) = (branch.points.as_slice(), branch.states.len());
    archive.column("point_value", points, |point| point.value)?;
    archive.column("point_period", points, |point| point.period)?;
    archive.column("point_turns", points, |point| point.turns as u64)?;
    archive.column("point_distance", points, |point| point.distance)?;
    archive.column("point_unstable_count", points, |point| point.unstable_count as u64)?;
    archive.column("point_trivial_defect", points, |point| point.trivial_defect)?;
    archive.column("point_liouville_defect", points, |point| point.liouville_defect)?;
    archive.column("point_profile_error", points, |point| point.profile_error)?;
    archive.rows("point_max", points, n, |point| point.maxima.clone())?;
    archive.rows("point_min", points, n, |point| point.minima.clone())?;
    archive.rows("point_mean", points, n, |point| point.means.clone())?;
    archive.rows("point_spread", points, n, |point| point.spreads.clone())?;
    archive.column("point_degree", points, |point| point.degree as u64)?;
    archive.column("point_intervals", points, |point| point.intervals as u64)?;
    archive.texts("point_choice", &points.iter().map(|point| point.choice.word()).collect::<Vec<_>>())?;
    archive.texts("point_reached", &points.iter().map(|point| point.reached.word()).collect::<Vec<_>>())?;
    archive.column("point_unresolved_count", points, |point| point.unresolved.map_or(0, |u| u.count as u64))?;
    archive.column("point_unresolved_below", points, |point| point.unresolved.map_or(f64::NAN, |u| u.below))?;
    archive.column("point_unresolved_log_sum", points, |point| point.unresolved.map_or(f64::NAN, |u| u.log_sum))?;
    let width = points.iter().map(|point| point.multipliers.len()).max().unwrap_or(0);
    let padded = |of: fn(&Multiplier) -> f64| {
        move |point: &Point| {
            // An array has no empty cells.
            (0..width).map(|k| point.multipliers.get(k).map_or(f64::NAN, of)).collect()
        }
    };
    archive.rows("point_multiplier_log_modulus", points, width, padded(|multiplier| multiplier.log_modulus))?;
    archive.rows("point_multiplier_angle", points, width, padded(|multiplier| multiplier.angle))
}

fn cycles(archive: &mut Archive<'_>, branch: &Branch) -> io::Result<()> {
    let orbits = orbits(branch);
    let names: Vec<&str> = orbits.iter().map(|orbit| orbit.name.as_str()).collect();
    archive.texts("orbit_name", &names)?;
    archive.column("orbit_point", &orbits, |orbit| orbit.point.map_or(-1, |index| index as i64))?;
    archive.column("orbit_value", &orbits, |orbit| orbit.value)?;
    archive.column("orbit_period", &orbits, |orbit| orbit.profile.period)?;
    archive.column("orbit_turns", &orbits, |orbit| orbit.turns as u64)?;
    let mut first = vec![0u64];
    for orbit in &orbits {
        first.push(first[first.len() - 1] + orbit.profile.n_nodes() as u64);
    }
    archive.numbers("orbit_first", &[first.len()], &first)?;
    let times = |of: fn(&Orbit<'_>, f64) -> f64| -> Vec<f64> {
        orbits
            .iter()
            .flat_map(|orbit| orbit.profile.node_times().into_iter().map(move |time| of(orbit, time)))
            .collect()
    };
    let scaled = times(|_, time| time);
    archive.numbers("orbit_scaled_time", &[scaled.len()], &scaled)?;
    archive.numbers("orbit_time", &[scaled.len()], &times(|orbit, time| time * orbit.profile.period))?;
    let states: Vec<f64> = orbits.iter().flat_map(|orbit| orbit.profile.values.iter().copied()).collect();
    archive.numbers("orbit_states", &[scaled.len(), branch.states.len()], &states)
}
