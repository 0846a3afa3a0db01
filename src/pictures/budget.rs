//! What the uncertainty of the gap voltage consists of.

use super::{Measured, capital};
use crate::bench::si;
use crate::plot::{Area, Axis, Panel, Picture, Scale};
use crate::report::Figure;
use crate::uncertainty::Budget;

/// Height of a bar with its gap.
const ROW: f64 = 48.0;
/// Contributions shown one by one; smaller ones are taken together.
const MOST: usize = 9;

pub(super) fn picture(measured: Measured<'_>) -> Option<Picture> {
    let budget = measured.measurement.budget.first()?;
    let rows = rows(budget);
    if rows.is_empty() {
        return None;
    }
    let count = rows.len() as f64;
    let area = Area { left: 16.0, ..Picture::area(ROW * count) };
    // The first row is the uppermost.
    let y = Scale { low: count, high: 0.0, logarithmic: false };
    let mut panel = Panel::new(
        area,
        Axis::percent(Scale::linear(0.0, 1.0), "share of the variance", 5),
        Axis::named(y, "input: share, and what it alone would bring", Vec::new()),
    );
    panel.lying_bars("shares", rows.iter().enumerate().map(|(k, row)| (row.share, k as f64 + 0.55, k as f64 + 0.92)));
    for (k, row) in rows.iter().enumerate() {
        let words = format!("{}: {:.1} %, {}", row.name, 100.0 * row.share, si(row.contribution, &budget.unit, 2));
        panel.words_after(0.0, k as f64 + 0.33, &words);
    }
    let result = Figure::prefixed(budget.result, &budget.unit).value_and_u();
    let title =
        format!("Of the uncertainty in {result}, {:.0} % comes from the {}", 100.0 * rows[0].share, rows[0].name);
    let advice = if budget.advice.is_empty() { String::new() } else { format!(" {}.", capital(&budget.advice)) };
    let reading = format!(
        "Each bar is the part of one input in the variance of the gap voltage; all together they are 100 %. Above it stands what \
         the input alone would bring. Only the longest bars are worth working on.{advice}"
    );
    Some(Picture { kind: "budget", title, reading, panels: vec![panel], legend: Vec::new() })
}

struct Row {
    name: String,
    share: f64,
    contribution: f64,
}

fn rows(budget: &Budget) -> Vec<Row> {
    let mut rows: Vec<Row> = budget
        .inputs
        .iter()
        .map(|line| Row { name: line.name.clone(), share: line.share, contribution: line.contribution })
        .collect();
    if rows.len() > MOST {
        let rest = rows.split_off(MOST - 1);
        rows.push(Row {
            name: format!("{} others", rest.len()),
            share: rest.iter().map(|row| row.share).sum(),
            contribution: rest.iter().map(|row| row.contribution.powi(2)).sum::<f64>().sqrt(),
        });
    }
    rows
}
