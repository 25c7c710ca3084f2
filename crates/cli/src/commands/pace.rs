//! `spinledger pace`: how fast update rules are here.

use crate::args::PaceArgs;
use crate::commands::{BROKEN, WELL, WRONG, tell_problems};
use crate::screen::{Screen, Style, Width, complain};
use serde_json::json;
use spinledger_engine::pace::{self, Bench, Case, Counted, Measured, Named, SHORTEST, Settings, Spread};
use spinledger_engine::{chain_text, program, vocabulary};
use spinledger_host::{Catalogue, Search};
use spinledger_terms::Vocabulary;

/// The lattice where another part is named and this one is not.
const LATTICE: &str = "{ plugin: square, size: 512 }";
/// The model likewise.
const MODEL: &str = "ising";

/// Measures what is named, or a standard set.
pub(crate) fn pace(args: &PaceArgs) -> anyhow::Result<u8> {
    let mut screen = Screen::new(if args.json { Style::Json } else { Style::Person });
    let catalogue = Catalogue::find(&Search::usual(&[]));
    for refusal in catalogue.refusals() {
        screen.trouble(&format!("not usable: {}", chain_text(&refusal.error)));
    }
    let vocabulary = vocabulary(&catalogue);
    let cases = match pace::admit(&named(args, &vocabulary), args.temperature.as_deref(), &vocabulary) {
        Ok(cases) => cases,
        Err(refused) => {
            tell_problems(&refused.source, &refused.problems, &mut screen);
            return Ok(WRONG);
        }
    };
    if cases.is_empty() {
        complain("spinledger: no rule serves here; `spinledger plugins` lists what is found");
        return Ok(WRONG);
    }
    let settings = Settings { seconds: args.seconds.max(SHORTEST), threads: usize::from(args.threads) };
    let mut bench = Bench::new(settings, |text| complain(text.trim_end())).map_err(anyhow::Error::msg)?;
    let mut rows = vec![head(settings.threads)];
    let mut status = WELL;
    for (number, case) in cases.iter().enumerate() {
        let of = cases.len();
        screen.bottom(|_: Width| {
            let (lattice, model, update) = texts(case);
            format!("{} of {of}: {update} on {lattice}, {model}", number + 1)
        });
        match bench.measure(case) {
            Ok(measured) => {
                screen.event(&event(case, &measured));
                rows.push(row(case, &measured));
            }
            Err(error) => {
                let (lattice, model, update) = texts(case);
                let Named { lattice: l, model: m, update: u, .. } = &case.named;
                screen.event(&json!({ "event": "failed", "lattice": l, "model": m, "update": u, "message": error }));
                screen.trouble(&format!("{update} on {lattice}, {model}: {error}"));
                status = BROKEN;
            }
        }
    }
    if rows.len() > 1 {
        screen.table(&rows, &[3, 4, 6, 8, 9]);
        close(&settings, &mut screen);
    }
    Ok(status)
}

/// Every combination of what is named; the standard set where nothing is.
fn named(args: &PaceArgs, vocabulary: &Vocabulary) -> Vec<Named> {
    if args.lattice.is_empty() && args.model.is_empty() && args.update.is_empty() {
        return pace::standard(vocabulary);
    }
    let or = |given: &[String], otherwise: &[&str]| -> Vec<String> {
        if given.is_empty() { otherwise.iter().map(|text| (*text).to_owned()).collect() } else { given.to_vec() }
    };
    let optional = args.update.is_empty();
    let rules =
        ["metropolis", "{ plugin: metropolis, lanes: 64 }", "heat-bath", "multi-spin", "wolff", "swendsen-wang"];
    let mut all = Vec::new();
    for lattice in or(&args.lattice, &[LATTICE]) {
        for model in or(&args.model, &[MODEL]) {
            for update in or(&args.update, &rules) {
                all.push(Named { lattice: lattice.clone(), model: model.clone(), update, optional });
            }
        }
    }
    all
}

/// The parts as named, short: `square, size: 512`.
fn texts(case: &Case) -> (String, String, String) {
    let short = |text: &str| {
        let text = text.trim();
        let inner = text.strip_prefix('{').and_then(|text| text.strip_suffix('}')).unwrap_or(text).trim();
        inner.strip_prefix("plugin:").unwrap_or(inner).trim().to_owned()
    };
    (short(&case.named.lattice), short(&case.named.model), short(&case.named.update))
}

fn event(case: &Case, measured: &Measured) -> serde_json::Value {
    let dynamics = &case.dynamics;
    let mut event = json!({
        "event": "pace",
        "lattice": case.named.lattice,
        "model": case.named.model,
        "update": case.named.update,
        "items": { "lattice": dynamics.lattice, "model": dynamics.model, "update": dynamics.update[0].0 },
        "processor": program::processor(),
        "program": program::program(),
    });
    if let (Some(event), serde_json::Value::Object(fields)) = (event.as_object_mut(), json!(measured)) {
        event.extend(fields);
        let threads = measured.threads.max(1) as f64;
        event.insert("per_nanosecond_and_core".into(), json!(measured.per_nanosecond.median / threads));
    }
    event
}

fn head(threads: usize) -> Vec<String> {
    let rate = if threads > 1 { "per ns and core" } else { "per ns" };
    ["lattice", "model", "rule", "chains", rate, "", "over plain", "quartiles", "observing", "bytes/spin", "code"]
        .map(String::from)
        .to_vec()
}

fn row(case: &Case, measured: &Measured) -> Vec<String> {
    let (lattice, model, update) = texts(case);
    let counted = match measured.counted {
        Counted::Updates => "updates",
        Counted::Sites => "sites",
        Counted::Flips => "flips",
    };
    let percent = |part: f64| format!("{:.0}%", (100.0 * part).round() + 0.0);
    let (ratio, quartiles) = match measured.ratio {
        Some(Spread { low, median, high }) => (digits(median), format!("{} to {}", digits(low), digits(high))),
        None => ("-".into(), String::new()),
    };
    let code = if measured.path.is_empty() { "-".into() } else { measured.path.clone() };
    vec![
        lattice,
        model,
        update,
        measured.chains.to_string(),
        digits(measured.per_nanosecond.median / measured.threads.max(1) as f64),
        counted.into(),
        ratio,
        quartiles,
        percent(measured.observing.median),
        digits(measured.state_bytes),
        code,
    ]
}

/// Three digits, or all before the point.
fn digits(x: f64) -> String {
    match x {
        100.0.. => format!("{x:.0}"),
        10.0.. => format!("{x:.1}"),
        1.0.. => format!("{x:.2}"),
        0.1.. => format!("{x:.3}"),
        _ => format!("{x:.4}"),
    }
}

fn close(settings: &Settings, screen: &mut Screen) {
    let processor = program::processor();
    let features = if processor.features.is_empty() { "none".to_owned() } else { processor.features };
    screen.line("");
    for text in [
        format!("{}; vector instructions: {features}; threads lent to rules: {}", processor.model, settings.threads),
        "over plain: how many times as fast as a plain program (one spin at a time, one thread) that ran in turn with it on a square lattice of as many sites; for wolff \
         and swendsen-wang a plain version of the same. The median of rounds, and between which values half of them lie."
            .into(),
        "observing: time on top of a sweep for energy and magnetisation (or order parameter) after each; below 0 it is noise. bytes/spin: the saved state. code: which of its code \
         ran, where a rule tells.".into(),
        "Absolute rates move with whatever else this machine does; compare ratios.".into(),
    ] {
        screen.tell(&text);
    }
}

#[cfg(test)]
mod tests {
    use super::digits;

    #[test]
    fn rates_have_three_digits() {
        let texts: Vec<String> = [0.04567, 0.4567, 1.0, 4.567, 45.67, 456.7, 1234.5].map(digits).to_vec();
        assert_eq!(texts, ["0.0457", "0.457", "1.00", "4.57", "45.7", "457", "1234"]);
    }
}
