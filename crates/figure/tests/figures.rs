//! Figures read back as XML and measured: what a reader of the print would check with a ruler.

mod synthetic;

use armilla_figure::{Diagram, Figure, FigureError, Measure, Portrait, Width};
use armilla_record::{Branch, EventKind, Solutions};
use roxmltree::{Document, Node};
use synthetic::{Cycle, awkward, branch, cascade, event, folded, many};

type Place = (f64, f64);

#[derive(Clone, Copy, Debug)]
struct Box {
    left: f64,
    top: f64,
    right: f64,
    bottom: f64,
}

impl Box {
    fn meets(&self, other: &Box) -> bool {
        self.left < other.right && other.left < self.right && self.top < other.bottom && other.top < self.bottom
    }

    fn holds(&self, (x, y): Place) -> bool {
        x >= self.left && x <= self.right && y >= self.top && y <= self.bottom
    }
}

fn number(node: Node, name: &str) -> f64 {
    let text = node.attribute(name).unwrap_or_else(|| panic!("no {name} in {node:?}"));
    text.trim_end_matches(['m', 'e', '%']).parse().unwrap_or_else(|_| panic!("{name}={text}"))
}

/// Coarse widths of sans-serif letters in units of the size, made without the crate's own table.
fn estimated_width(text: &str) -> f64 {
    text.chars()
        .map(|letter| match letter {
            'i' | 'j' | 'l' | '.' | ',' | ' ' | '/' | '(' | ')' | 't' | 'f' | '1' | '\u{2009}' | '\u{A0}' | '\'' => 0.3,
            'm' | 'w' | 'W' | 'M' => 0.84,
            'A'..='Z' => 0.67,
            '\u{2026}' => 1.0,
            _ => 0.54,
        })
        .sum()
}

fn words(node: Node) -> String {
    node.descendants().filter(|node| node.is_text()).filter_map(|node| node.text()).collect()
}

fn text_box(node: Node) -> Box {
    let (x, y, size) = (number(node, "x"), number(node, "y"), number(node, "font-size"));
    let width = estimated_width(&words(node)) * size;
    let before = match node.attribute("text-anchor") {
        Some("start") => 0.0,
        Some("middle") => 0.5,
        _ => 1.0,
    };
    let (left, right) = (-before * width, (1.0 - before) * width);
    // `dy` puts the baseline 0.76 of the size below; letters reach from there 0.74 up and 0.2 down.
    let (top, bottom) = (0.02 * size, 0.96 * size);
    match node.attribute("transform") {
        None => Box { left: x + left, right: x + right, top: y + top, bottom: y + bottom },
        // Read from below: along the text is upwards, down the letters is rightwards.
        Some(_) => Box { left: x + top, right: x + bottom, top: y - right, bottom: y - left },
    }
}

fn places(node: Node) -> Vec<Place> {
    let text = node.attribute("points").expect("a line of corners");
    text.split_whitespace()
        .map(|pair| pair.split_once(',').expect("x,y"))
        .map(|(x, y)| (x.parse().expect("a number"), y.parse().expect("a number")))
        .collect()
}

fn groups<'a>(document: &'a Document, class: &str) -> Vec<Node<'a, 'a>> {
    let has = |node: &Node| node.attribute("class").is_some_and(|all| all.split(' ').any(|one| one == class));
    document.descendants().filter(|node| node.has_tag_name("g") && has(node)).collect()
}

fn lines_in(group: Node) -> Vec<Vec<Place>> {
    group.descendants().filter(|node| node.has_tag_name("polyline")).map(places).collect()
}

fn frame(document: &Document) -> Box {
    let corners = lines_in(groups(document, "frame")[0]).swap_remove(0);
    Box { left: corners[0].0, top: corners[0].1, right: corners[2].0, bottom: corners[2].1 }
}

/// Whether a straight piece passes through a box, by fine sampling.
fn passes(piece: &[Place], through: &Box) -> bool {
    let steps = ((piece[1].0 - piece[0].0).hypot(piece[1].1 - piece[0].1) / 20.0).ceil().max(1.0) as usize;
    (0..=steps).map(|k| k as f64 / steps as f64).any(|t| {
        through.holds((piece[0].0 + t * (piece[1].0 - piece[0].0), piece[0].1 + t * (piece[1].1 - piece[0].1)))
    })
}

fn double(mut diagram: Diagram) -> Figure {
    diagram.width = Width::Double;
    Figure::Diagram(diagram)
}

fn level(measure: fn(String) -> Measure) -> Diagram {
    Diagram::new(measure("level".into()))
}

/// Every synthetic case in both widths, by name.
fn cases() -> Vec<(&'static str, String)> {
    let one = vec![branch("a", 0.0, 1, |_| Cycle {
        value: 2.0,
        max: 1.0,
        min: -1.0,
        period: 1.0,
        unstable_count: 1,
        log_modulus: 0.4,
    })];
    let data = [
        ("cascade", cascade()),
        ("folded", vec![folded(1.0, 10)]),
        ("tiny", vec![folded(1e-9, 30)]),
        ("huge", vec![folded(1e9, 30)]),
        ("many", many(40)),
        ("awkward", awkward()),
        ("one point", one),
    ];
    let mut cases = Vec::new();
    for (name, branches) in &data {
        for measure in [Measure::Max as fn(String) -> Measure, Measure::Extremes, Measure::Spread, Measure::PeakToPeak]
        {
            cases.push((*name, Figure::Diagram(level(measure)).draw(branches).expect("draws")));
            cases.push((*name, double(level(measure)).draw(branches).expect("draws")));
        }
        for measure in [Measure::Period, Measure::LargestMultiplier] {
            cases.push((*name, Figure::diagram(measure.clone()).draw(branches).expect("draws")));
            cases.push((*name, double(Diagram::new(measure)).draw(branches).expect("draws")));
        }
        if branches.iter().any(|branch| !branch.events.is_empty()) {
            cases.push((*name, Figure::portrait("level", "flow").draw(branches).expect("draws")));
            let wide = Portrait { width: Width::Double, ..Portrait::new("flow", "level") };
            cases.push((*name, Figure::Portrait(wide).draw(branches).expect("draws")));
        }
    }
    cases
}

#[test]
fn nothing_is_cut_and_no_words_overlap() {
    for (name, svg) in cases() {
        let document = Document::parse(&svg).unwrap_or_else(|fault| panic!("{name}: {fault}"));
        let view: Vec<f64> = document
            .root_element()
            .attribute("viewBox")
            .expect("a view box")
            .split(' ')
            .map(|part| part.parse().expect("a number"))
            .collect();
        let page = Box { left: 0.0, top: 0.0, right: view[2], bottom: view[3] };
        let texts: Vec<Node> = document.descendants().filter(|node| node.has_tag_name("text")).collect();
        assert!(texts.len() > 4, "{name}");
        let boxes: Vec<Box> = texts.iter().map(|text| text_box(*text)).collect();
        for (i, (text, rect)) in texts.iter().zip(&boxes).enumerate() {
            let inside = page.holds((rect.left, rect.top)) && page.holds((rect.right, rect.bottom));
            assert!(inside, "{name}: `{}` leaves the page: {rect:?}", words(*text));
            for (other, with) in boxes[..i].iter().zip(&texts) {
                assert!(!rect.meets(other), "{name}: `{}` meets `{}`", words(*text), words(*with));
            }
            assert!(number(*text, "font-size") >= 699.9, "{name}: letters below 7 pt");
        }
    }
}

#[test]
fn names_touch_no_curve_and_the_legend_stays_outside() {
    for (name, svg) in cases() {
        let document = Document::parse(&svg).expect("valid XML");
        let frame = frame(&document);
        let curves: Vec<Vec<Place>> = groups(&document, "curve").into_iter().flat_map(lines_in).collect();
        for text in groups(&document, "names").iter().flat_map(|group| group.descendants()) {
            if !text.has_tag_name("text") {
                continue;
            }
            let rect = text_box(text);
            assert!(frame.holds((rect.left, rect.top)) && frame.holds((rect.right, rect.bottom)), "{name}");
            let hit = curves.iter().any(|curve| curve.windows(2).any(|piece| passes(piece, &rect)));
            assert!(!hit, "{name}: a curve runs through `{}`", words(text));
        }
        for text in groups(&document, "legend").iter().flat_map(|group| group.descendants()) {
            if text.has_tag_name("text") {
                assert!(!text_box(text).meets(&frame), "{name}: `{}` is inside the frame", words(text));
            }
        }
    }
}

#[test]
fn curves_stay_in_the_frame_even_where_the_range_cuts_them() {
    let zoomed = Diagram { x: Some((1.5, 3.1)), y: Some((0.9, 2.2)), ..level(Measure::Max) };
    let mut all: Vec<String> = cases().into_iter().map(|(_, svg)| svg).collect();
    all.push(Figure::Diagram(zoomed).draw(&[folded(1.0, 10)]).expect("draws"));
    for svg in &all {
        let document = Document::parse(svg).expect("valid XML");
        let frame = frame(&document);
        for place in groups(&document, "curve").into_iter().flat_map(lines_in).flatten() {
            assert!(frame.holds(place), "{place:?} outside {frame:?}");
        }
    }
    // The cut runs along the frame itself: exact ends on it, not clamped corners.
    let document = Document::parse(all.last().expect("pushed")).expect("valid XML");
    let frame = frame(&document);
    let on_rim = |(x, y): Place| {
        [x - frame.left, x - frame.right, y - frame.top, y - frame.bottom].iter().any(|off| off.abs() < 1.5)
    };
    for line in groups(&document, "curve").into_iter().flat_map(lines_in) {
        assert!(line.iter().filter(|place| on_rim(**place)).count() <= 2, "a curve runs along the frame");
    }
}

/// Stable and unstable lines of the branch drawn first, and the corners of its marker.
#[test]
fn the_style_changes_exactly_at_the_event() {
    let svg = Figure::Diagram(level(Measure::Max)).draw(&cascade()).expect("draws");
    let document = Document::parse(&svg).expect("valid XML");
    let curves = groups(&document, "curve");
    // Four branches, each stable up to its doubling and unstable after.
    assert_eq!(curves.len(), 8);
    for pair in curves.chunks(2) {
        let classes: Vec<&str> = pair.iter().filter_map(|group| group.attribute("class")).collect();
        assert_eq!(classes, ["curve stable", "curve unstable"]);
        assert_eq!(pair[0].attribute("stroke-dasharray"), None);
        assert_eq!(pair[1].attribute("stroke-dasharray"), Some("400 200"));
        let (before, after) = (lines_in(pair[0]).swap_remove(0), lines_in(pair[1]).swap_remove(0));
        assert_eq!(before.last(), after.first());
    }
    // The parameter axis is linear: the place of gain = 2 lies between the ticks named 1.0 and 3.0.
    let ticks: Vec<(f64, String)> = groups(&document, "axes")[0]
        .descendants()
        .filter(|node| node.has_tag_name("text") && node.attribute("text-anchor") == Some("middle"))
        .map(|node| (number(node, "x"), words(node)))
        .collect();
    let at = |name: &str| ticks.iter().find(|tick| tick.1 == name).unwrap_or_else(|| panic!("{ticks:?}")).0;
    let birth = lines_in(curves[1]).swap_remove(0)[0];
    assert!((birth.0 - 0.5 * (at("1.0") + at("3.0"))).abs() <= 1.5, "{birth:?}");
    // The doubled branch starts at the event it was born at.
    let child = lines_in(curves[2]).swap_remove(0)[0];
    assert!((child.0 - birth.0).hypot(child.1 - birth.1) <= 1.5, "{child:?} {birth:?}");
}

#[test]
fn a_branch_that_is_stable_throughout_has_no_dashes() {
    let steady = branch("a", 2.0, 9, |s| Cycle {
        value: s,
        max: s * s,
        min: -s,
        period: 1.0,
        unstable_count: 0,
        log_modulus: -0.5,
    });
    let svg = Figure::Diagram(level(Measure::Max)).draw(&[steady]).expect("draws");
    assert!(!svg.contains("dasharray") && !svg.contains(">unstable<"));
}

/// Two events between neighbouring points: the branch is dashed between them only.
#[test]
fn events_inside_one_stride_each_change_the_style() {
    let cycle = |s: f64| {
        let unstable_count = usize::from(s > 1.3 && s < 1.7);
        Cycle { value: s, max: s, min: -s, period: 1.0, unstable_count, log_modulus: -0.1 }
    };
    let mut coarse = branch("a", 4.0, 5, cycle);
    for (kind, at) in [(EventKind::Doubling, 1.3), (EventKind::Pitchfork, 1.7)] {
        let mut event = event("a", kind, 1, at, &cycle(at));
        // Without measures of its own the event still says where the style changes.
        event.maxima.clear();
        coarse.events.push(event);
    }
    let fixed = Diagram { x: Some((0.0, 4.0)), names: false, ..level(Measure::Max) };
    let svg = Figure::Diagram(fixed).draw(&[coarse]).expect("draws");
    let document = Document::parse(&svg).expect("valid XML");
    let frame = frame(&document);
    let styles: Vec<(&str, f64)> = groups(&document, "curve")
        .into_iter()
        .map(|group| {
            let end = lines_in(group)[0].last().expect("corners").0;
            (group.attribute("class").expect("a class"), 4.0 * (end - frame.left) / (frame.right - frame.left))
        })
        .collect();
    let wanted = [("curve stable", 1.3), ("curve unstable", 1.7), ("curve stable", 4.0)];
    assert_eq!(styles.len(), 3, "{styles:?}");
    for (found, wanted) in styles.iter().zip(wanted) {
        assert!(found.0 == wanted.0 && (found.1 - wanted.1).abs() < 1e-3, "{styles:?}");
    }
}

/// Exact: the synthetic fold is a cubic; drawn from ten points it must be round and turn at its fold.
#[test]
fn folds_are_round_and_finely_drawn() {
    let svg = Figure::Diagram(level(Measure::Max)).draw(&[folded(1.0, 10)]).expect("draws");
    let document = Document::parse(&svg).expect("valid XML");
    let curve: Vec<Place> = groups(&document, "curve").into_iter().flat_map(lines_in).flatten().collect();
    let mut corners = curve.clone();
    corners.dedup();
    let sharpest = corners
        .windows(3)
        .map(|three| {
            let heading = |a: Place, b: Place| (b.1 - a.1).atan2(b.0 - a.0);
            let turn = (heading(three[1], three[2]) - heading(three[0], three[1])).abs();
            turn.min(std::f64::consts::TAU - turn).to_degrees()
        })
        .fold(0.0, f64::max);
    assert!(sharpest < 12.0, "a corner of {sharpest} degrees");
    // No staircase: nearly every corner has a height of its own, and steps are far below a point.
    let mut heights: Vec<i64> = corners.iter().map(|place| place.1 as i64).collect();
    heights.sort_unstable();
    heights.dedup();
    assert!(heights.len() * 10 > corners.len() * 9 && corners.len() > 100, "{} of {}", heights.len(), corners.len());
    // The rightmost place of the turn is the fold: max = 1.5 + 1/sqrt(3) of 0.25 to 2.75 in a frame with 4 % room.
    let frame = frame(&document);
    let after: Vec<Place> = curve.iter().copied().filter(|place| place.1 < 0.5 * (frame.top + frame.bottom)).collect();
    let turn = after.iter().copied().fold((0.0, 0.0), |best: Place, place| if place.0 > best.0 { place } else { best });
    let share = (frame.bottom - turn.1) / (frame.bottom - frame.top);
    let exact = (1.5 + 3.0f64.sqrt().recip() - 0.25 + 0.1) / (2.5 + 0.2);
    assert!((share - exact).abs() < 0.005, "{share} {exact}");
    let deviation = curve
        .iter()
        .map(|place| {
            let max = 0.15 + 2.7 * (frame.bottom - place.1) / (frame.bottom - frame.top);
            let u = max - 1.5;
            let exact = 2.0 + 3.0 * (u - u * u * u);
            let ends = [-1.25f64, 1.25].map(|u| 2.0 + 3.0 * (u - u * u * u));
            let span = ends[0] - ends[1];
            let value = ends[1] - 0.04 * span + 1.08 * span * (place.0 - frame.left) / (frame.right - frame.left);
            (value - exact).abs() / span
        })
        .fold(0.0, f64::max);
    assert!(deviation < 0.012, "{deviation} of the width off the cubic");
}

#[test]
fn markers_have_one_shape_for_each_kind_and_are_explained_in_words() {
    let svg = double(level(Measure::Max)).draw(&many(16)).expect("draws");
    let document = Document::parse(&svg).expect("valid XML");
    let legend: Vec<String> =
        groups(&document, "legend").into_iter().map(words).map(|words| words.trim().to_string()).collect();
    for wanted in
        ["stable", "unstable", "fold", "period doubling", "torus bifurcation", "pitchfork", "Hopf bifurcation"]
    {
        assert!(legend.iter().any(|words| words == wanted), "{wanted} not in {legend:?}");
    }
    // The legend's own markers: the black polygons moved to their first corner must all differ.
    let mut shapes: Vec<Vec<(i64, i64)>> = groups(&document, "legend")
        .into_iter()
        .filter_map(|group| group.children().rfind(|node| node.has_tag_name("polygon")))
        .map(places)
        .map(|corners| corners.iter().map(|c| ((c.0 - corners[0].0) as i64, (c.1 - corners[0].1) as i64)).collect())
        .collect();
    let count = shapes.len();
    assert!(count >= 7, "{count}");
    shapes.sort();
    shapes.dedup();
    assert_eq!(shapes.len(), count);
    // Whole words: nothing in capitals alone.
    assert!(!legend.iter().any(|words| words.len() > 1 && words.chars().all(|c| c.is_ascii_uppercase())), "{legend:?}");
}

#[test]
fn starts_and_edges_carry_no_marker_and_targets_a_number() {
    let mut plain = cascade();
    plain.truncate(1);
    let mut marked = plain.clone();
    for kind in [EventKind::Start, EventKind::Edge] {
        let cycle = Cycle { value: 0.3, max: 1.1, min: 0.0, period: 1.0, unstable_count: 0, log_modulus: -1.0 };
        marked[0].events.insert(0, event("a", kind, 1, 0.0, &cycle));
    }
    let figure = Figure::Diagram(level(Measure::Max));
    let svg = figure.draw(&plain).expect("draws");
    assert_eq!(svg, figure.draw(&marked).expect("draws"));
    let document = Document::parse(&svg).expect("valid XML");
    let names: Vec<String> = groups(&document, "names").into_iter().map(|g| words(g).trim().to_string()).collect();
    assert_eq!(names, ["1", "2", "a/doubling1"]);
}

#[test]
fn labels_are_escaped_and_the_caption_is_inside() {
    let svg = Figure::Diagram(level(Measure::Max)).draw(&awkward()).expect("draws");
    let document = Document::parse(&svg).expect("valid XML");
    let text_of = |tag: &str| words(document.descendants().find(|node| node.has_tag_name(tag)).expect("is there"));
    assert!(text_of("title").starts_with("Tanks <A> & \"B\", with τ > 0: maximum of"), "{}", text_of("title"));
    let caption = text_of("desc");
    for part in
        ["α<β = −3.5×10^−12", "n = 4", "10^−9", "solid: stable, dashed: unstable", "Not searched", "a.doubling1"]
    {
        assert!(caption.contains(part), "{part} not in {caption}");
    }
    let mut named = awkward();
    named.iter_mut().for_each(|branch| branch.states[0].label = "level <above> & \"brim\"".into());
    let svg = double(level(Measure::Max)).draw(&named).expect("draws");
    let document = Document::parse(&svg).expect("valid XML");
    let axes: String = groups(&document, "axes").into_iter().map(words).collect();
    assert!(axes.contains("maximum of level <above> & \"brim\" (m3/s)"), "{axes}");
}

#[test]
fn the_page_has_the_asked_width_and_the_same_bytes_each_time() {
    for (width, mm) in [(Width::Single, 86.0), (Width::Double, 178.0), (Width::Millimetres(120.0), 120.0)] {
        let figure = Figure::Diagram(Diagram { width, ..level(Measure::Extremes) });
        let svg = figure.draw(&cascade()).expect("draws");
        assert_eq!(svg, figure.draw(&cascade()).expect("draws"));
        let document = Document::parse(&svg).expect("valid XML");
        assert!((number(document.root_element(), "width") - mm).abs() < 2e-3);
        let view: Vec<f64> = document
            .root_element()
            .attribute("viewBox")
            .expect("a view box")
            .split(' ')
            .map(|part| part.parse().expect("a number"))
            .collect();
        // 100 units a point, 72 points an inch of 25.4 mm, the same both ways.
        let height = number(document.root_element(), "height");
        assert!((view[2] / 7200.0 * 25.4 - mm).abs() < 2e-3 && (view[3] / 7200.0 * 25.4 - height).abs() < 2e-3);
    }
}

#[test]
fn errors_tell_what_to_change() {
    let branches = cascade();
    let refused = |figure: Figure| figure.draw(&branches).expect_err("is refused");
    assert_eq!(Figure::diagram(Measure::Period).draw(&[]), Err(FigureError::NoBranches));
    let unknown = refused(Figure::portrait("level", "flaw")).to_string();
    assert!(unknown.contains("`level`, `flow`") && unknown.ends_with("did you mean `flow`?"), "{unknown}");
    let outside = refused(Figure::Diagram(Diagram { x: Some((50.0, 60.0)), ..level(Measure::Max) })).to_string();
    assert!(outside.contains("from 0.3 to 4 along x"), "{outside}");
    for range in [(2.0, 1.0), (1.0, 1.0), (f64::NAN, 1.0), (0.0, f64::INFINITY)] {
        let told = refused(Figure::Diagram(Diagram { x: Some(range), ..level(Measure::Max) }));
        assert!(matches!(told, FigureError::Range { field: "x", .. }), "{told:?}");
    }
    let told = refused(Figure::Diagram(Diagram { y: Some((-1.0, 1.0)), logarithmic: true, ..level(Measure::Max) }));
    assert!(told.to_string().contains("two positive finite numbers"), "{told}");
    let told = refused(Figure::Diagram(Diagram { logarithmic: true, ..level(Measure::Min) }));
    assert!(matches!(told, FigureError::NothingInside { x: None, .. }), "{told:?}");
    for mm in [10.0, f64::NAN, 1e9] {
        let told = refused(Figure::Diagram(Diagram { width: Width::Millimetres(mm), ..level(Measure::Max) }));
        assert!(matches!(told, FigureError::Width { .. }), "{told:?}");
    }
    let told =
        refused(Figure::Portrait(Portrait { orbits: vec!["a/target9".into()], ..Portrait::new("level", "flow") }));
    assert!(told.to_string().contains("did you mean `a/target1`?"), "{told}");
    let mut mixed = cascade();
    mixed[1].parameter.name = "lag".into();
    assert!(matches!(Figure::diagram(Measure::Period).draw(&mixed), Err(FigureError::Mixed { what: "parameter", .. })));
}

/// Spoiled data never panic; what is sound is still drawn.
#[test]
fn unsound_numbers_are_left_out() {
    let spoil: [fn(&mut Branch); 9] = [
        |b| b.points[3].maxima[0] = f64::NAN,
        |b| b.points[3].value = f64::INFINITY,
        |b| b.points[3].distance = f64::NAN,
        |b| b.points.iter_mut().for_each(|point| point.distance = 1.0),
        |b| b.points.iter_mut().for_each(|point| point.maxima.clear()),
        |b| b.points[2].maxima[0] = 1e308,
        |b| b.events.iter_mut().for_each(|event| event.maxima.clear()),
        |b| b.events.iter_mut().for_each(|event| (event.turns, event.distance) = (0, 1e9)),
        |b| b.points.clear(),
    ];
    for (index, spoil) in spoil.iter().enumerate() {
        let mut branches = cascade();
        spoil(&mut branches[0]);
        for width in [Width::Single, Width::Double] {
            for measure in [Measure::Extremes("level".into()), Measure::Period, Measure::LargestMultiplier] {
                let svg = Figure::Diagram(Diagram { width, ..Diagram::new(measure) }).draw(&branches);
                let svg = svg.unwrap_or_else(|fault| panic!("{index}: {fault}"));
                assert!(!svg.contains("NaN") && !svg.contains("inf"), "{index}");
                Document::parse(&svg).unwrap_or_else(|fault| panic!("{index}: {fault}"));
            }
        }
        Figure::portrait("level", "flow").draw(&branches).unwrap_or_else(|fault| panic!("{index}: {fault}"));
    }
}

/// Equilibria beside cycles: thin and grey, told in the legend and the caption, dashed exactly from the Hopf point on, which
/// changes the count by two; without a period they leave a diagram of periods to the cycles.
#[test]
fn equilibria_stand_beside_cycles() {
    let rest = |s: f64| Cycle {
        value: s,
        max: 0.5,
        min: 0.5,
        period: 0.0,
        unstable_count: if s > 1.0 { 2 } else { 0 },
        log_modulus: 0.0,
    };
    let mut line = branch("a", 2.0, 8, rest);
    line.of = Solutions::Equilibria;
    line.points.iter_mut().for_each(|point| point.multipliers.clear());
    line.events = vec![event("a", EventKind::Hopf, 1, 1.0, &rest(1.0))];
    let mut cycles = branch("a.hopf1", 1.0, 12, |s| Cycle {
        value: 1.0 + s * s,
        max: 0.5 + s,
        min: 0.5 - s,
        period: 6.0 + s,
        unstable_count: 0,
        log_modulus: -s,
    });
    cycles.born_at = Some("a/hopf1".into());
    let branches = [line, cycles];
    let svg = double(level(Measure::Max)).draw(&branches).expect("draws");
    assert!(svg.contains(">equilibria<") && svg.contains("of cycles and equilibria against"), "{svg}");
    let document = Document::parse(&svg).expect("valid XML");
    let curves = groups(&document, "curve");
    let classes: Vec<&str> = curves.iter().filter_map(|group| group.attribute("class")).collect();
    assert_eq!(classes, ["curve stable", "curve unstable", "curve stable"]);
    let (before, after) = (lines_in(curves[0]).swap_remove(0), lines_in(curves[1]).swap_remove(0));
    let birth = lines_in(curves[2]).swap_remove(0)[0];
    assert_eq!(before.last(), after.first());
    assert!((after[0].0 - birth.0).hypot(after[0].1 - birth.1) <= 1.5, "{:?} {birth:?}", after[0]);
    let periods = double(Diagram::new(Measure::Period)).draw(&branches).expect("draws");
    assert!(!periods.contains(">equilibria<"), "equilibria have no period");
}
