//! Continuation: each run starts from the end state of the one before, there and back again.

use super::bench::{Bench, Stop, Trial};
use super::picture::{Line, picture};
use super::thresholds::csv_of;
use super::wish::Continuation;
use crate::run::columns::COLUMNS;
use crate::run::summary::replace;
use crate::study::diagram::to_png;
use crate::study::rules::unit_of;
use std::path::Path;

/// Columns before those of the series.
const HEAD: [&str; 7] = ["parameter", "direction", "given", "value", "outcome", "stopped_by", "run"];

/// Walk all continuations of a study and write them down.
pub fn all(bench: &Bench<'_>, folder: &Path) -> Result<(), Stop> {
    for (number, wish) in bench.study.branches.continuations.iter().enumerate() {
        let stem = if number == 0 { "continuation".to_owned() } else { format!("continuation_{}", number + 1) };
        let (there, back) = walk(bench, wish)?;
        let name = bench.name(&wish.axis);
        let head: Vec<&str> = HEAD.into_iter().chain(COLUMNS).collect();
        let rows: Vec<Vec<String>> = [("up", &there), ("down", &back)]
            .into_iter()
            .flat_map(|(way, trials)| trials.iter().map(move |trial| (way, trial)))
            .map(|(way, trial)| row(&name, way, trial))
            .collect();
        replace(&folder.join(format!("{stem}.csv")), &csv_of(&head, &rows))?;
        let svg = drawn(bench, wish, &name, &there, &back);
        replace(&folder.join(format!("{stem}.svg")), svg.as_bytes())?;
        replace(&folder.join(format!("{stem}.png")), &to_png(&svg)?)?;
        bench.tell(format_args!("Files: {0}/{stem}.csv, {0}/{stem}.svg, {0}/{stem}.png", folder.display()));
    }
    Ok(())
}

fn walk(bench: &Bench<'_>, wish: &Continuation) -> Result<(Vec<Trial>, Vec<Trial>), Stop> {
    let last = wish.axis.points.len() - 1;
    let share = |k: usize| k as f64 / last as f64;
    let name = bench.name(&wish.axis);
    bench.tell(format_args!("{name}, up:"));
    let mut there: Vec<Trial> = Vec::new();
    for k in 0..=last {
        let trial = bench.trial(&wish.axis, share(k), &[], there.last())?;
        there.push(trial);
    }
    let mut back = Vec::new();
    if wish.back {
        bench.tell(format_args!("{name}, down:"));
        let mut before = there.last().cloned();
        for k in (0..last).rev() {
            let trial = bench.trial(&wish.axis, share(k), &[], before.as_ref())?;
            back.push(trial.clone());
            before = Some(trial);
        }
    }
    Ok((there, back))
}

fn row(name: &str, way: &str, trial: &Trial) -> Vec<String> {
    let mut row: Vec<String> = [name, way, &trial.given].map(str::to_owned).to_vec();
    row.push(format!("{:e}", trial.value));
    row.push(trial.outcome.clone());
    row.push(trial.end.stopped_by().to_owned());
    row.push(trial.id.clone());
    row.extend(COLUMNS.iter().map(|column| trial.end.end(column).map_or_else(String::new, |x| format!("{x:e}"))));
    row
}

fn drawn(bench: &Bench<'_>, wish: &Continuation, name: &str, there: &[Trial], back: &[Trial]) -> String {
    let (unit, size) = bench.unit(&wish.axis);
    let points = |trials: &[&Trial]| -> Vec<(f64, f64)> {
        trials.iter().filter_map(|trial| Some((trial.value / size, trial.end.end(wish.column)?))).collect()
    };
    let up: Vec<&Trial> = there.iter().collect();
    let down: Vec<&Trial> = there.last().into_iter().chain(back).filter(|_| !back.is_empty()).collect();
    let lines = [Line { name: "up", points: points(&up) }, Line { name: "down", points: points(&down) }];
    let (bare, measure) = unit_of(wish.column);
    let column_unit = measure.map_or("", |measure| measure.unit);
    let short = name.rsplit('.').next().unwrap_or(name).replace('_', " ");
    picture(&bench.study.title, (&short, &unit), (&bare.replace('_', " "), column_unit), wish.axis.logarithmic, &lines)
}
