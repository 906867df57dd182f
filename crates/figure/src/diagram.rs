//! A measure of the cycle against the followed parameter.

use armilla_record::Branch;

use crate::caption;
use crate::drawn::{Drawn, dots, join_births, marks, places};
use crate::error::FigureError;
use crate::geometry::{Place, Rect};
use crate::measure::Reader;
use crate::page::{Page, Scale, points};
use crate::range::{Asked, extent};
use crate::shown::Shown;
use crate::spec::{Diagram, Measure};
use crate::stroke::Line;
use crate::text;

/// Draws the diagram as SVG text.
pub(crate) fn draw(diagram: &Diagram, branches: &[Branch]) -> Result<String, FigureError> {
    let first = &branches[0];
    let reader = Reader::new(diagram, &first.states)?;
    let asked = Asked::new(diagram.x, diagram.y, reader.logarithmic)?;
    let width = points(diagram.width)?;
    let mut drawn: Vec<Drawn> = branches.iter().map(|branch| Drawn::new(branch, &reader)).collect();
    join_births(&mut drawn, branches, &reader);
    let whole: Vec<Vec<Place>> = drawn.iter().flat_map(|drawn| drawn.lines().map(|(_, line)| line)).collect();
    let window = asked.window(&whole, &dots(&drawn)).ok_or_else(|| nothing_inside(&reader, &drawn))?;
    let lines: Vec<Line> = drawn
        .iter()
        .enumerate()
        .flat_map(|(owner, drawn)| drawn.lines().map(move |line| (owner, line)))
        .filter_map(|(owner, (dashed, line))| Line::inside(&window, owner, dashed, &line))
        .collect();
    let marks = marks(branches, &drawn, &reader, &window);
    let with_guide = diagram.measure == Measure::LargestMultiplier && window.top < 0.0 && window.bottom > 0.0;
    let guide = with_guide.then_some([(window.left, 0.0), (window.right, 0.0)]);
    let (x, y) = scales(first, &reader, &window);
    let shown = Shown { branches, drawn: &drawn, lines: &lines, marks: &marks, window: &window, guide };
    let page = Page::new(width, &x, &y, shown.legend(width));
    let mut canvas = page.canvas();
    shown.draw(&mut canvas, &page, diagram.names);
    let title = format!(
        "{}: {} against {}",
        text::clean(&first.model_title),
        plain_label(&reader),
        caption::quantity(&first.parameter)
    );
    Ok(canvas.finish(&title, &description(branches, &reader, &diagram.measure)))
}

fn scales(first: &Branch, reader: &Reader, window: &Rect) -> (Scale, Scale) {
    let x = Scale {
        range: (window.left, window.right),
        logarithmic: false,
        quantity: text::quantity(&first.parameter.label),
        unit: first.parameter.unit.clone(),
    };
    let y = Scale {
        range: (window.top, window.bottom),
        logarithmic: reader.logarithmic,
        quantity: reader.label(),
        unit: reader.unit().to_string(),
    };
    (x, y)
}

fn nothing_inside(reader: &Reader, drawn: &[Drawn]) -> FigureError {
    let extent = extent(places(drawn));
    let shown = |(lo, hi): (f64, f64)| {
        if reader.logarithmic { (10f64.powf(lo), 10f64.powf(hi)) } else { (lo, hi) }
    };
    FigureError::NothingInside {
        what: plain_label(reader),
        x: extent.map(|extent| extent.0),
        y: extent.map(|extent| shown(extent.1)),
    }
}

/// The label of the measure without the marks of its setting.
fn plain_label(reader: &Reader) -> String {
    text::clean(&reader.label())
}

fn description(branches: &[Branch], reader: &Reader, measure: &Measure) -> String {
    let meaning = match measure {
        Measure::Spread(_) => " Spread is the root mean square about the mean.",
        Measure::Period => " The period counts all turns of the cycle.",
        Measure::LargestMultiplier => " The trivial multiplier is left out.",
        _ => "",
    };
    format!(
        "{} of {} against {}; solid: stable, dashed: unstable; thresholds carry one marker shape for each kind.\
         {meaning} {} {}",
        plain_label(reader),
        caption::solutions(branches),
        caption::quantity(&branches[0].parameter),
        caption::setting(branches),
        caption::not_searched(branches)
    )
}
