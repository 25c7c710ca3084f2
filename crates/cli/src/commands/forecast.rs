//! `spinledger forecast`: what would run and why, about how long it takes, and whether there is room for it.

use crate::args::ForecastArgs;
use crate::commands::{WELL, WRONG, open, results, workers};
use crate::screen::{Screen, Style, Width};
use crate::text::{amount, bytes, columns, counted, duration, fit, ranges, wide, wrap};
use anyhow::Context;
use serde_json::json;
use spinledger_engine::forecast::{Disk, Forecast, Reason, StepForecast, forecast as forecast_pipeline};
use spinledger_ledger::Ledger;

/// So many reasons of a step are shown.
const SHOWN: usize = 8;
/// So many new points are shown one by one; of more, over what they range.
const POINTS: usize = 3;

/// Forecasts a pipeline. Nothing is written, not even an empty ledger.
pub(crate) fn forecast(args: &ForecastArgs) -> anyhow::Result<u8> {
    let mut screen = Screen::new(if args.json { Style::Json } else { Style::Person });
    let Some(study) = open(&args.pipeline, &mut screen)? else { return Ok(WRONG) };
    let path = &args.ledger.ledger;
    let ledger = if Ledger::is_at(path) {
        Some(Ledger::open(path).with_context(|| format!("cannot open the ledger {}", path.display()))?)
    } else {
        None
    };
    let forecast = forecast_pipeline(&study, ledger.as_ref())?;
    let workers = workers(args.workers);
    let seconds = forecast.elapsed(workers);
    let disks = forecast.disks(path, &results(args.out.as_deref(), &study));
    screen.event(&json!({ "event": "forecast", "steps": forecast.steps, "workers": workers, "seconds": seconds,
        "disks": disks }));
    if args.json {
        return Ok(WELL);
    }
    tell_steps(&forecast, &mut screen);
    tell_reasons(&forecast, &mut screen);
    for step in &forecast.steps {
        if let Some(problem) = &step.problem {
            screen.trouble(&format!("{} will break:\n{problem}", step.step));
        }
    }
    let due = |step: &StepForecast| step.due != Some(0) || step.partial > 0;
    if !forecast.steps.iter().any(due) {
        screen.line("nothing is due");
        return Ok(WELL);
    }
    screen.line("");
    tell_time(&forecast, seconds, workers, &mut screen);
    tell_room(&disks, &mut screen);
    Ok(WELL)
}

fn tell_steps(forecast: &Forecast, screen: &mut Screen) {
    let header = ["step", "does", "parcels", "recorded", "partial", "due", "spin updates", "work", "waits for"];
    let mut rows = vec![header.map(String::from).to_vec()];
    for step in &forecast.steps {
        let count = |n: Option<u64>| n.map_or("?".to_owned(), |n| n.to_string());
        let nonzero = |x: f64, text: fn(f64) -> String| if x > 0.0 { text(x) } else { String::new() };
        rows.push(vec![
            step.step.clone(),
            step.does.clone(),
            count(step.parcels),
            step.recorded.to_string(),
            step.partial.to_string(),
            count(step.due),
            nonzero(step.updates, amount),
            step.seconds.map_or("?".to_owned(), |seconds| nonzero(seconds, duration)),
            step.waits.join(", "),
        ]);
    }
    // What goes first where there is no room for it.
    let room = Width::now().columns().unwrap_or(usize::MAX);
    let mut right = vec![2, 3, 4, 5, 6, 7];
    for leaves in [1, 8, 6, 4, 3, 7] {
        if fits(&rows, &right, room) {
            break;
        }
        rows.iter_mut().for_each(|row| row[leaves].clear());
        right.retain(|column| *column != leaves);
    }
    let kept: Vec<usize> = (0..header.len()).filter(|at| !rows[0][*at].is_empty()).collect();
    let pick = |row: &Vec<String>| kept.iter().map(|at| row[*at].clone()).collect();
    let right: Vec<usize> = (0..kept.len()).filter(|at| right.contains(&kept[*at])).collect();
    let rows: Vec<Vec<String>> = rows.iter().map(pick).collect();
    columns(&rows, &right).iter().for_each(|line| screen.line(&fit(line, room)));
}

fn fits(rows: &[Vec<String>], right: &[usize], room: usize) -> bool {
    columns(rows, right).iter().all(|line| wide(line) <= room)
}

fn tell_reasons(forecast: &Forecast, screen: &mut Screen) {
    let header = ["why", "parcels", "what", "before", "now"];
    let mut rows = vec![header.map(String::from).to_vec()];
    let mut lines = Vec::new();
    for step in &forecast.steps {
        let reasons = condensed(&step.reasons);
        let mut name = step.step.clone();
        let mut row = |cells: [String; 4]| {
            let mut row = vec![std::mem::take(&mut name)];
            row.extend(cells);
            rows.push(row);
        };
        for reason in reasons.iter().take(SHOWN) {
            let parcels = if reason.parcels == 0 { String::new() } else { reason.parcels.to_string() };
            let goes_on = if reason.continues { " (continues)" } else { "" };
            let arrow = if reason.before.is_empty() { "" } else { " ->" };
            let colon = if reason.before.is_empty() && reason.now.is_empty() { "" } else { ":" };
            let words = format!("{}{colon} {}{arrow} {}{goes_on}", reason.what, reason.before, reason.now);
            lines.push(format!("{}: {parcels} {words}", step.step));
            row([parcels, reason.what.clone(), reason.before.clone(), format!("{}{goes_on}", reason.now)]);
        }
        if reasons.len() > SHOWN {
            let more = counted((reasons.len() - SHOWN) as u64, "more reason");
            let more = format!("and {more} (--json tells all)");
            lines.push(format!("{}: {more}", step.step));
            row([String::new(), more, String::new(), String::new()]);
        }
    }
    if lines.is_empty() {
        return;
    }
    screen.line("");
    if fits(&rows, &[1], Width::now().columns().unwrap_or(usize::MAX)) {
        columns(&rows, &[1]).iter().for_each(|line| screen.line(line));
    } else {
        lines.iter().for_each(|line| tell(line, screen));
    }
}

/// Many new points as one line, in the place of the first.
fn condensed(reasons: &[Reason]) -> Vec<Reason> {
    const NEW: &str = "new point";
    let new: Vec<&Reason> = reasons.iter().filter(|reason| reason.what == NEW).collect();
    if new.len() <= POINTS {
        return reasons.to_vec();
    }
    let point = |reason: &&Reason| -> Vec<(String, String)> {
        let pairs = reason.now.split(", ").filter_map(|pair| pair.split_once(' '));
        pairs.map(|(name, value)| (name.to_owned(), value.to_owned())).collect()
    };
    let together = Reason {
        what: format!("{} new points", new.len()),
        now: ranges(&new.iter().map(point).collect::<Vec<_>>()),
        parcels: new.iter().map(|reason| reason.parcels).sum(),
        ..new[0].clone()
    };
    let mut out: Vec<Reason> = Vec::new();
    for reason in reasons {
        if reason.what != NEW {
            out.push(reason.clone());
        } else if !out.contains(&together) {
            out.push(together.clone());
        }
    }
    out
}

fn tell_time(forecast: &Forecast, seconds: Option<f64>, workers: usize, screen: &mut Screen) {
    let with = counted(workers as u64, "worker");
    let untold: Vec<&str> =
        forecast.steps.iter().filter(|step| step.seconds.is_none()).map(|step| step.step.as_str()).collect();
    let text = match seconds {
        None => "how long it takes is not known: no sampling is on record in this ledger".to_owned(),
        Some(seconds) if untold.is_empty() => {
            format!("about {} with {with}, by the times on record", duration(seconds))
        }
        Some(seconds) => {
            let untold = untold.join(", ");
            format!("about {} with {with}, by the times on record; not known: {untold}", duration(seconds))
        }
    };
    tell(&text, screen);
}

fn tell_room(disks: &[Disk], screen: &mut Screen) {
    // Tables of analyses are small, and not counted.
    if disks.iter().all(|disk| disk.bytes == 0.0) {
        return;
    }
    let sizes: Vec<String> =
        disks.iter().map(|disk| format!("{} to {}", bytes(disk.bytes), disk.path.display())).collect();
    let free = disks.iter().filter_map(|disk| disk.free).reduce(f64::min);
    let free = free.map_or(String::new(), |free| format!("; {} are free", bytes(free)));
    tell(&format!("writes about {}{free}", sizes.join(" and ")), screen);
    if disks.iter().any(|disk| !disk.enough) {
        screen.trouble("warning: there is not enough room on the disk for that");
    }
}

fn tell(text: &str, screen: &mut Screen) {
    wrap(text, Width::now().columns().unwrap_or(usize::MAX)).iter().for_each(|line| screen.line(line));
}

#[cfg(test)]
mod tests {
    use super::*;

    #[test]
    fn many_new_points_are_one_line() {
        let reason = |what: &str, now: &str| Reason {
            what: what.into(),
            before: String::new(),
            now: now.into(),
            continues: false,
            parcels: 4,
        };
        let few = [reason("seed", "2"), reason("new point", "size 8, temperature 2")];
        assert_eq!(condensed(&few), few);
        let points = ["2", "2.5", "3", "3.5"].map(|t| reason("new point", &format!("size 8, temperature {t}")));
        let many = [&points[..], &few[..1]].concat();
        let condensed = condensed(&many);
        assert_eq!(condensed.len(), 2);
        assert_eq!((condensed[0].what.as_str(), condensed[0].parcels), ("4 new points", 16));
        assert_eq!(condensed[0].now, "size 8, temperature 2 to 3.5 (4)");
    }
}
