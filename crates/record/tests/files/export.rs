//! Exports: the same numbers again, in the forms other tools read.
//!
//! Files of a whole run were also read once by hand with NumPy 2 (`numpy.load`), which gave the shapes and numbers
//! that these tests expect.

use std::fs;
use std::io::Read;
use std::path::Path;

use armilla_record::*;

use crate::sample::branch;

/// A results folder with these branches.
fn folder(place: &Path, branches: &[Branch]) -> Results {
    let path = place.join("a.results");
    let mut results = Results::create(&path, false).expect("nothing is there");
    results.write_study("()\n").expect("a study");
    branches.iter().for_each(|branch| results.write_branch(branch).expect("a branch"));
    results.finish().expect("finished");
    Results::open(&path).expect("results")
}

/// One array of an archive: type, shape, bytes. Outside: read by the definition of the format, NumPy Enhancement
/// Proposal 1 (Kern 2007, from memory): magic, version, length of the header, header, raw numbers in C order.
fn array(path: &Path, name: &str) -> (String, Vec<usize>, Vec<u8>) {
    let file = fs::File::open(path).expect("an archive");
    let mut archive = npyz::zip::ZipArchive::new(file).expect("a zip container");
    let mut bytes = Vec::new();
    archive.by_name(&format!("{name}.npy")).expect(name).read_to_end(&mut bytes).expect("its bytes");
    assert_eq!(&bytes[..6], b"\x93NUMPY");
    assert_eq!(bytes[6], 1, "format 1 holds all that is needed");
    let length = u16::from_le_bytes([bytes[8], bytes[9]]) as usize;
    assert_eq!((10 + length) % 16, 0, "aligned");
    let header = std::str::from_utf8(&bytes[10..10 + length]).expect("ASCII").to_string();
    assert!(header.contains("'fortran_order': False"), "{header}");
    let part = |from: &str, to: &str| {
        let rest = header.split_once(from).expect(from).1;
        rest.split_once(to).expect(to).0.to_string()
    };
    let shape = part("'shape': (", ")");
    let shape =
        shape.split(',').filter(|word| !word.trim().is_empty()).map(|word| word.trim().parse().expect("a length"));
    (part("'descr': '", "'"), shape.collect(), bytes[10 + length..].to_vec())
}

fn floats(path: &Path, name: &str) -> (Vec<usize>, Vec<u64>) {
    let (kind, shape, bytes) = array(path, name);
    assert_eq!(kind, "<f8", "{name}");
    (shape, bytes.chunks(8).map(|eight| u64::from_le_bytes(eight.try_into().expect("eight"))).collect())
}

fn counts(path: &Path, name: &str, kind: &str) -> Vec<i64> {
    let (found, _, bytes) = array(path, name);
    assert_eq!(found, kind, "{name}");
    bytes.chunks(8).map(|eight| i64::from_le_bytes(eight.try_into().expect("eight"))).collect()
}

fn texts(path: &Path, name: &str) -> Vec<String> {
    let (kind, shape, bytes) = array(path, name);
    let width: usize = kind.strip_prefix("<U").expect("texts").parse().expect("a length");
    assert!(width > 0);
    let read = |cell: &[u8]| {
        let letters = cell.chunks(4).map(|four| u32::from_le_bytes(four.try_into().expect("four")));
        letters.filter(|letter| *letter != 0).map(|letter| char::from_u32(letter).expect("a letter")).collect()
    };
    let texts: Vec<String> = bytes.chunks(4 * width).map(read).collect();
    assert_eq!(shape, [texts.len()]);
    texts
}

fn bits<'a>(numbers: impl IntoIterator<Item = &'a f64>) -> Vec<u64> {
    numbers.into_iter().map(|number| number.to_bits()).collect()
}

#[test]
fn arrays_have_the_bits_of_the_branch() {
    for seed in 0..20 {
        let place = tempfile::tempdir().expect("a temporary folder");
        let original = branch(seed, "a", 4);
        let n = original.states.len();
        let written =
            folder(place.path(), std::slice::from_ref(&original)).export(&[ExportFormat::Npz]).expect("exported");
        let path = place.path().join("a.results/export/a.npz");
        assert_eq!(written.as_slice(), std::slice::from_ref(&path));
        assert_eq!(floats(&path, "point_value"), (vec![4], bits(original.points.iter().map(|point| &point.value))));
        assert_eq!(
            floats(&path, "point_max"),
            (vec![4, n], bits(original.points.iter().flat_map(|point| &point.maxima)))
        );
        assert_eq!(floats(&path, "point_spread").1, bits(original.points.iter().flat_map(|point| &point.spreads)));
        let unstable: Vec<i64> = original.points.iter().map(|point| point.unstable_count as i64).collect();
        assert_eq!(counts(&path, "point_unstable_count", "<u8"), unstable);
        let (shape, moduli) = floats(&path, "point_multiplier_log_modulus");
        let width = original.points.iter().map(|point| point.multipliers.len()).max().unwrap_or(0);
        assert_eq!(shape, [4, width]);
        for (point, row) in original.points.iter().zip(moduli.chunks(width.max(1))) {
            let (there, absent) = row.split_at(point.multipliers.len());
            assert_eq!(there, bits(point.multipliers.iter().map(|multiplier| &multiplier.log_modulus)));
            assert!(absent.iter().all(|bits| f64::from_bits(*bits).is_nan()));
        }
        assert_eq!(
            texts(&path, "state_name"),
            original.states.iter().map(|state| state.name.clone()).collect::<Vec<_>>()
        );
        assert_eq!(texts(&path, "parameter_unit"), [original.parameter.unit]);
    }
}

#[test]
fn orbits_can_be_cut_apart() {
    let place = tempfile::tempdir().expect("a temporary folder");
    let original = (0..)
        .map(|seed| branch(seed, "a", 5))
        .find(|b| b.profiles.len() > 1 && b.events.iter().any(|e| e.profile.is_some()));
    let original = original.expect("one of the seeds");
    folder(place.path(), std::slice::from_ref(&original))
        .export(&[ExportFormat::Csv, ExportFormat::Npz])
        .expect("exported");
    let path = place.path().join("a.results/export/a.npz");
    let (names, points) = (texts(&path, "orbit_name"), counts(&path, "orbit_point", "<i8"));
    let (first, states) = (counts(&path, "orbit_first", "<u8"), floats(&path, "orbit_states").1);
    let (times, scaled) = (floats(&path, "orbit_time").1, floats(&path, "orbit_scaled_time").1);
    let n = original.states.len();
    assert_eq!(
        names.len(),
        original.profiles.len() + original.events.iter().filter(|event| event.profile.is_some()).count()
    );
    assert_eq!(first.len(), names.len() + 1);
    for (k, name) in names.iter().enumerate() {
        let (from, to) = (first[k] as usize, first[k + 1] as usize);
        let profile = match points[k] {
            -1 => original.events.iter().find(|event| event.name == *name).and_then(|event| event.profile.as_ref()),
            index => {
                assert_eq!(*name, format!("a/point{index}"));
                original.profiles.iter().find(|stored| stored.point == index as usize).map(|stored| &stored.profile)
            }
        };
        let profile = profile.expect(name);
        assert_eq!(states[from * n..to * n], bits(&profile.values), "{name}");
        assert_eq!((f64::from_bits(scaled[from]), f64::from_bits(scaled[to - 1])), (0.0, 1.0));
        assert_eq!(times[to - 1], profile.period.to_bits(), "the last node stands for the whole period");
    }
    // The table holds the same numbers in the same order.
    let table = fs::read_to_string(place.path().join("a.results/export/a.orbits.csv")).expect("a table");
    let mut reader = csv::Reader::from_reader(table.as_bytes());
    let rows: Vec<csv::StringRecord> = reader.records().map(|row| row.expect("a row")).collect();
    let cells =
        rows.iter().flat_map(|row| row.iter().skip(6).map(|cell| cell.parse::<f64>().expect("a number").to_bits()));
    assert_eq!(cells.collect::<Vec<_>>(), states);
    let starts: Vec<&str> = first[..names.len()].iter().map(|row| &rows[*row as usize][0]).collect();
    assert_eq!(starts, names);
}

/// A state may have any name, also that of a column.
#[test]
fn no_name_of_a_state_meets_a_column() {
    let place = tempfile::tempdir().expect("a temporary folder");
    let mut original = (0..).map(|seed| branch(seed, "a", 3)).find(|b| b.states.len() == 3).expect("one of the seeds");
    for (state, name) in original.states.iter_mut().zip(["time", "period", "orbit"]) {
        state.name = name.into();
    }
    folder(place.path(), &[original]).export(&[ExportFormat::Csv]).expect("exported");
    let table = fs::read_to_string(place.path().join("a.results/export/a.orbits.csv")).expect("a table");
    let mut columns: Vec<&str> = table.lines().next().expect("a header").split(',').collect();
    assert_eq!(columns[6..], ["time_value", "period_value", "orbit_value"]);
    columns.sort_unstable();
    columns.dedup();
    assert_eq!(columns.len(), 9);
}

#[test]
fn a_folder_without_branches_is_refused() {
    let place = tempfile::tempdir().expect("a temporary folder");
    let refused = folder(place.path(), &[]).export(&[ExportFormat::Csv]).expect_err("there is nothing");
    assert!(refused.to_string().contains("holds no branch yet"), "{refused}");
    assert!(!place.path().join("a.results/export").exists());
}

#[test]
fn a_folder_with_exports_can_be_replaced_one_with_more_cannot() {
    let place = tempfile::tempdir().expect("a temporary folder");
    let path = place.path().join("a.results");
    folder(place.path(), &[branch(1, "a", 3)]).export(&[ExportFormat::Csv, ExportFormat::Npz]).expect("exported");
    Results::create(&path, true).expect("all of it is armilla's");
    fs::write(path.join("export/my evaluation.py"), "the only copy").expect("a file");
    let refused = Results::create(&path, true).expect_err("a file that armilla did not write");
    assert!(matches!(refused, RecordError::Foreign { .. }), "{refused}");
}
