//! The tables: one row for each conclusion, the pairs, their covariance.

use crate::steps::flags_text;
use spinledger_stats::crossing::{CrossingFlag, CrossingInfo, Extrapolated, Shift};
use spinledger_terms::{Column, Table, Value};

/// Rows of the three tables, of all sets.
#[derive(Default)]
pub(super) struct Tables {
    rest: Vec<Vec<(String, Value)>>,
    main: Vec<(usize, &'static str, Option<Line>, String)>,
    pairs: Vec<(usize, [f64; 6], String)>,
    covariance: Vec<(usize, [f64; 5], String)>,
}

/// A conclusion: its name, its numbers, what is doubtful about it.
type Row<'a> = (&'static str, Option<Line>, Vec<&'a [CrossingFlag]>);

/// Numbers of a conclusion.
#[derive(Clone, Copy)]
struct Line {
    value: f64,
    error: f64,
    chi_squared: Option<f64>,
    degrees: Option<usize>,
    p: Option<f64>,
}

impl Line {
    fn whole(fit: &Extrapolated) -> Self {
        Line {
            value: fit.value,
            error: fit.error,
            chi_squared: Some(fit.chi_squared),
            degrees: Some(fit.degrees),
            p: Some(fit.p),
        }
    }

    fn constant(fit: &Extrapolated) -> Self {
        let fit = &fit.constant;
        Line {
            value: fit.value,
            error: fit.error,
            chi_squared: Some(fit.chi_squared),
            degrees: Some(fit.degrees),
            p: Some(fit.p),
        }
    }

    fn shift(shift: &Shift) -> Self {
        Line { value: shift.value, error: shift.error, chi_squared: None, degrees: None, p: Some(shift.p) }
    }
}

fn word(flag: CrossingFlag) -> &'static str {
    match flag {
        CrossingFlag::NoCrossing => "no-crossing",
        CrossingFlag::BadFit => "bad-fit",
        CrossingFlag::Biased => "biased",
        CrossingFlag::SizeDependent => "size-dependent",
        _ => "few-sizes",
    }
}

/// The text of what is doubtful about the series or curves, and of the flags that the numbers have.
fn flags(common: &[String], own: &[&[CrossingFlag]]) -> String {
    let mut words: Vec<&str> = common.iter().map(String::as_str).collect();
    own.iter().copied().flatten().for_each(|flag| words.push(word(*flag)));
    flags_text(&words)
}

impl Tables {
    /// The rows of one set. `common` is doubtful about its series or curves.
    pub(super) fn add(&mut self, rest: &[(String, Value)], found: &CrossingInfo, common: &[String]) {
        let set = self.rest.len();
        self.rest.push(rest.to_vec());
        let all = found.flags.as_slice();
        let less = &found.without_smallest;
        let (nu, nu_error) = found.inverse_nu;
        let exponent = Line { value: nu, error: nu_error, chi_squared: None, degrees: None, p: None };
        // One pair cannot be extrapolated: it is a limit of all sizes for want of a better, but says nothing of how the limit depends on them.
        let extrapolated = less.place.as_ref().filter(|fit| !fit.members.is_empty());
        // Two pairs cannot test a correction, but a constant they can.
        let tested = less.place.as_ref().is_some_and(|fit| fit.constant.degrees > 0);
        let constant = |flag: &CrossingFlag| !(tested && *flag == CrossingFlag::FewSizes);
        let of_constant: Vec<CrossingFlag> = less.flags.iter().copied().filter(constant).collect();
        // A shift says nothing about the fit; what it is null for stands among the flags of all: sizes that do not cross, or too few of them.
        let of_shift: Vec<CrossingFlag> = match less.shift {
            Some(_) => all.iter().copied().filter(|flag| *flag == CrossingFlag::NoCrossing).collect(),
            None => all.to_vec(),
        };
        let lines: [Row<'_>; 8] = [
            ("critical_temperature", found.place.as_ref().map(Line::whole), vec![all, &found.place_flags]),
            ("crossing_value", found.value.as_ref().map(Line::whole), vec![all, &found.place_flags]),
            // For comparison only: without a correction the error does not tell how far off it is.
            (
                "critical_temperature_uncorrected",
                found.place.as_ref().map(Line::constant),
                vec![all, &found.constant_flags],
            ),
            (
                "crossing_value_uncorrected",
                found.value.as_ref().map(Line::constant),
                vec![all, &found.value_constant_flags],
            ),
            ("critical_temperature_without_smallest", extrapolated.map(Line::whole), vec![&less.flags]),
            (
                "critical_temperature_without_smallest_uncorrected",
                less.place.as_ref().map(Line::constant),
                vec![&of_constant, &less.constant_flags],
            ),
            ("shift_without_smallest", less.shift.as_ref().map(Line::shift), vec![&found.place_flags, &of_shift]),
            ("one_over_nu_used", Some(exponent).filter(|line| line.value.is_finite()), vec![all]),
        ];
        for (name, line, own) in lines {
            self.main.push((set, name, line, flags(common, &own)));
        }
        let flags = flags(common, &[all]);
        for pair in &found.pairs {
            let row = [pair.size, pair.partner, pair.place, pair.error, pair.value, pair.value_error];
            self.pairs.push((set, row, flags.clone()));
        }
        for (i, a) in found.pairs.iter().enumerate() {
            for (j, b) in found.pairs.iter().enumerate() {
                let row = [a.size, a.partner, b.size, b.partner, found.covariance[(i, j)]];
                self.covariance.push((set, row, flags.clone()));
            }
        }
    }

    /// Columns that tell the curves of one set from those of another; none where there is one set.
    fn rest_columns(&self, sets: &[usize]) -> Vec<Column> {
        let Some(first) = self.rest.first() else { return Vec::new() };
        let cell = |set: usize, at: usize| self.rest[set][at].1.clone();
        let column = |at: usize| {
            let name = &first[at].0;
            if self.rest.iter().all(|rest| rest[at].1.as_i64().is_some()) {
                Column::integers(name, "", sets.iter().map(|s| cell(*s, at).as_i64()).collect())
            } else if self.rest.iter().all(|rest| rest[at].1.as_f64().is_some()) {
                Column::numbers(name, "", sets.iter().map(|s| cell(*s, at).as_f64()).collect())
            } else {
                let text = |value: Value| value.as_str().map_or_else(|| value.canonical(), str::to_owned);
                Column::texts(name, sets.iter().map(|s| Some(text(cell(*s, at)))).collect())
            }
        };
        (0..first.len()).map(column).collect()
    }

    pub(super) fn tables(self, unit: &str) -> Vec<(String, Table)> {
        let count = |x: f64| Some(x as i64);
        let sets: Vec<usize> = self.main.iter().map(|row| row.0).collect();
        let mut main = self.rest_columns(&sets);
        let numbers = |get: fn(&Line) -> Option<f64>| self.main.iter().map(|r| r.2.as_ref().and_then(get)).collect();
        main.push(Column::texts("quantity", self.main.iter().map(|r| Some(r.1.to_owned())).collect()));
        main.push(Column::numbers("value", "", numbers(|l| Some(l.value))));
        main.push(Column::numbers("error", "", numbers(|l| Some(l.error))));
        main.push(Column::numbers("chi_squared", "", numbers(|l| l.chi_squared)));
        let degrees = self.main.iter().map(|r| r.2.as_ref().and_then(|l| l.degrees).map(|d| d as i64)).collect();
        main.push(Column::integers("degrees", "", degrees));
        main.push(Column::numbers("p_value", "", numbers(|l| l.p)));
        main.push(Column::texts("flags", self.main.iter().map(|r| Some(r.3.clone())).collect()));

        let sets: Vec<usize> = self.pairs.iter().map(|row| row.0).collect();
        let mut pairs = self.rest_columns(&sets);
        let cells = |at: usize| self.pairs.iter().map(|row| Some(row.1[at])).collect::<Vec<_>>();
        pairs.push(Column::integers("size", "", self.pairs.iter().map(|row| count(row.1[0])).collect()));
        pairs.push(Column::integers("partner", "", self.pairs.iter().map(|row| count(row.1[1])).collect()));
        pairs.push(Column::numbers("temperature", unit, cells(2)));
        pairs.push(Column::numbers("error", unit, cells(3)));
        pairs.push(Column::numbers("value", "", cells(4)));
        pairs.push(Column::numbers("value_error", "", cells(5)));
        pairs.push(Column::texts("flags", self.pairs.iter().map(|row| Some(row.2.clone())).collect()));

        let sets: Vec<usize> = self.covariance.iter().map(|row| row.0).collect();
        let mut covariance = self.rest_columns(&sets);
        for (at, name) in ["size", "partner", "other_size", "other_partner"].into_iter().enumerate() {
            let cells = self.covariance.iter().map(|row| count(row.1[at])).collect();
            covariance.push(Column::integers(name, "", cells));
        }
        let squared = if unit.is_empty() { String::new() } else { format!("{unit}^2") };
        let cells = self.covariance.iter().map(|row| Some(row.1[4])).collect();
        covariance.push(Column::numbers("covariance", &squared, cells));
        covariance.push(Column::texts("flags", self.covariance.iter().map(|row| Some(row.2.clone())).collect()));
        vec![
            ("main".into(), Table { columns: main }),
            ("pairs".into(), Table { columns: pairs }),
            ("covariance".into(), Table { columns: covariance }),
        ]
    }
}
