//! The choice of the degree: against all degrees tried in turn, along a branch, and what each point says of it.

use armilla_collocation::work;
use armilla_follow::{Orientation, Problem};
use armilla_record::{MeshReason, Reached};
use armilla_stability::CyclePoint;
use armilla_tests::{Case, branch, job, settings};

/// Work of the cycle as chosen, over the least work among all degrees with their own numbers of intervals.
fn excess(case: &Case, guess: &armilla_record::Profile, accuracy: f64, at: f64) -> f64 {
    let of = |cycle: &CyclePoint| work(cycle.degree, cycle.intervals());
    let chosen = case.start(guess, settings(accuracy), at).1;
    let others = (3..=8).map(|degree| case.start(guess, settings(accuracy).with_degree(degree), at).1);
    let tried: Vec<(usize, usize)> = others.map(|cycle| (cycle.degree, cycle.intervals())).collect();
    let least = tried.iter().map(|&(degree, intervals)| work(degree, intervals)).fold(f64::INFINITY, f64::min);
    let excess = of(&chosen) / least;
    eprintln!(
        "{accuracy:e}: degree {} with {} intervals, {excess:.2} of the least among {tried:?}",
        chosen.degree,
        chosen.intervals()
    );
    excess
}

/// Independent: every degree tried. The choice sees its neighbours only and changes for a gain of 15 %; where a kink has to be
/// cut out of the mesh the number of intervals is a matter of luck within a factor of two.
#[test]
fn the_degree_chosen_does_with_hardly_more_work_than_the_best() {
    let circle = Case::new("x1", "mu", 1.0).with("k", 0.5);
    let relaxing = Case::new("vanderpol", "mu", 1.0);
    let kinked = Case::new("softened_kink", "width", 1.0);
    let cases = [
        (&circle, circle.circle(0.5, std::f64::consts::TAU), 0.25, 1.25),
        (&relaxing, relaxing.settled(5.0), 5.0, 1.25),
        (&kinked, kinked.settled(0.01), 0.01, 1.5),
    ];
    for (case, guess, at, most) in &cases {
        for accuracy in [1e-6, 1e-9, 1e-12] {
            assert!(excess(case, guess, accuracy, *at) < *most);
        }
    }
}

/// As the kink sharpens the degree falls, for high derivatives are worth nothing at a kink; from degree 3 it rises,
/// at the start at once and along the branch one by one.
#[test]
fn the_degree_goes_down_and_up_along_a_branch() {
    let fields =
        r#"start: Settle(at: { "width": 0.5 }), follow: (parameter: "width", from: 0.002, to: 0.6), accuracy: 1e-8"#;
    let traced = job("softened_kink", fields);
    let points = &branch(&traced, "a").points;
    let degrees: Vec<usize> = points.iter().map(|point| point.degree).collect();
    eprintln!("{degrees:?}");
    let start = points.iter().find(|point| point.choice == MeshReason::Start).expect("a start");
    assert!(points.iter().filter(|point| point.value < 0.1).all(|point| point.degree < start.degree), "{degrees:?}");

    let study = |from: f64| {
        format!(
            "start: Settle(at: {{ \"width\": {from} }}), follow: (parameter: \"width\", from: 0.002, to: 0.6), accuracy: 1e-6"
        )
    };
    let traced = job("softened_kink", &study(0.5));
    let points = &branch(&traced, "a").points;
    let start = points.iter().find(|point| point.choice == MeshReason::Start).expect("a start");
    assert!(points.iter().filter(|point| point.value < 0.1).all(|point| point.degree < start.degree), "{points:?}");
    let circle = Case::new("x1", "mu", 1.0).with("k", 0.5);
    let low = armilla_stability::CycleSettings { degree: 3, ..settings(1e-9) };
    let cycle = circle.start(&circle.circle(0.5, std::f64::consts::TAU), low, 0.25).1;
    assert!(cycle.degree >= 6, "{}", cycle.degree);

    // A cycle in the middle of a branch, told in pieces of degree 3: the next mesh has a higher one, by one at a time.
    let (mut problem, cycle) = circle.start(&circle.circle(0.5, std::f64::consts::TAU), settings(1e-9), 0.25);
    let mut told = armilla_record::Profile { degree: 3, values: Vec::new(), ..problem.profile(&cycle) };
    let fine = problem.profile(&cycle);
    let (mut evaluator, mut state) = (fine.evaluator(), vec![0.0; fine.n_states]);
    for time in told.node_times() {
        evaluator.at(time, &mut state);
        told.values.extend_from_slice(&state);
    }
    let point = CyclePoint::from_profile(&told, 0.25);
    let tangent = problem.tangent(&point, Orientation::Parameter(1.0)).expect("a tangent");
    let (renewed, _) = problem.renew(&point, &[&tangent]).expect("another mesh");
    assert!(renewed.degree > 3, "{}", renewed.degree);
}

/// Every point says why its mesh is what it is, and whether the accuracy is reached.
#[test]
fn each_point_says_what_was_chosen_and_why() {
    let fields = r#"start: Settle(at: { "mu": 1 }), follow: (parameter: "mu", from: 1, to: 20), accuracy: 1e-9"#;
    let traced = job("vanderpol", fields);
    let points = &branch(&traced, "a").points;
    let count = |choice: MeshReason| points.iter().filter(|point| point.choice == choice).count();
    assert_eq!(count(MeshReason::Start), 1);
    assert!(count(MeshReason::Kept) > 0 && count(MeshReason::ProfileError) > 0);
    assert_eq!(count(MeshReason::Unstated) + count(MeshReason::Given), 0);
    assert!(points.iter().all(|point| point.reached == Reached::Accuracy && point.profile_error <= 1e-9));
    // A relaxation cycle at mu = 20 has fronts that the round one at mu = 1 has not.
    let intervals = points.iter().map(|point| point.intervals);
    let (fewest, most) = (intervals.clone().min().expect("points"), intervals.max().expect("points"));
    assert!(most >= 4 * fewest, "{fewest} to {most} intervals");
    for pair in points.windows(2) {
        let same = (pair[0].degree, pair[0].intervals) == (pair[1].degree, pair[1].intervals);
        assert!(same || pair[1].choice != MeshReason::Kept, "{pair:?}");
    }

    let given = job("vanderpol", &format!("{fields}, mesh: (intervals: 8, degree: 3)"));
    let points = &branch(&given, "a").points;
    assert!(points.iter().any(|point| point.reached == Reached::GivenMesh && point.profile_error > 1e-9));
    assert!(points.iter().all(|point| (point.degree, point.intervals) == (3, 8)));
    assert!(
        given.shortfalls.iter().any(|words| words.contains("the mesh fixed by the study")),
        "{:?}",
        given.shortfalls
    );
}

/// A cycle of range 2e-4 about 1e9 has four digits less than 1e-9 of its range: rounding stands in the way, and the points
/// say so.
#[test]
fn a_floor_of_roundoff_is_named() {
    let fields = r#"start: Settle(at: { "mu": 0.25 }), follow: (parameter: "mu", from: 0.2, to: 0.3), accuracy: 1e-10"#;
    let traced = job("far_circle", fields);
    let points = &branch(&traced, "a").points;
    assert!(points.iter().all(|point| point.reached == Reached::RoundoffFloor && point.profile_error > 1e-10));
    assert!(traced.shortfalls.iter().any(|words| words.contains("rounding")), "{:?}", traced.shortfalls);
}
