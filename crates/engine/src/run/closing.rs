//! Closing steps: series on record, tables gathered, files in the folder of results.

use super::{Item, Run, RunOptions, Stop, words};
use crate::failure::Failure;
use crate::job::{CloseJob, Job, Layout, StatesJob, StatesOf};
use crate::planning::{AnalysisPlan, Parcel, Product, Series, closed_series, kind_of, point_columns};
use crate::results::series_file;
use crate::steps::Split;
use crate::{gather, program};
use spinledger_plan::sample::states_preimage;
use spinledger_terms::{ContentHash, Key, Value};
use std::collections::BTreeSet;
use std::path::PathBuf;

impl Run<'_> {
    /// Closes the complete points of a sample step: series on record, files in place.
    pub(super) fn close_sample(&mut self, number: usize) -> Result<(), Stop> {
        let study = self.study;
        let step = &study.pipeline.steps[number];
        let points = self.samples.remove(&number).unwrap_or_default();
        let mut items = Vec::new();
        let mut files = Vec::new();
        for (at, point) in points.iter().enumerate() {
            let columns = point_columns(study, step, point);
            let preimage = point.series_preimage(&columns);
            let key = Key::of(&preimage);
            let file = format!("{}/{}", step.name, series_file(&point.columns, &key));
            let known = self.index.get(&key).map(|line| line.content);
            let kept = known.is_some_and(|content| self.results.keep(&step.name, &file, &key, &content));
            files.push((key, file.clone(), kept));
            if known.is_some() && kept {
                continue;
            }
            let Some(pieces) = point.pieces(&self.index) else { continue };
            let parameters = Value::map([
                ("columns", Value::Map(point.columns.iter().cloned().collect())),
                ("measure", Value::Integer(point.measure as i64)),
            ]);
            let job = CloseJob {
                preimage,
                publish: known.is_none(),
                pieces,
                starts: point.starts(),
                layout: Some(Layout { path: self.results.path(&file), columns }),
                parameters,
                pipeline: None,
            };
            let words = words::point(point.columns.iter().map(|(name, value)| (name, value)));
            items.push(Item { step: number, point: at, words, job: Job::Close(job), cost: 0.0 });
        }
        self.results.announce(
            items.iter().map(|item| (step.name.as_str(), files[item.point].1.as_str(), files[item.point].0)),
        )?;
        let broken = self.execute(&items, false)?;
        let mut series: Vec<Option<Series>> = Vec::new();
        for (at, (point, (key, file, kept))) in points.iter().zip(files).enumerate() {
            let closed =
                if broken.contains(&(number, at)) { None } else { closed_series(study, step, point, &self.index) };
            if let (Some(closed), false) = (&closed, kept) {
                self.results.wrote(&step.name, &file, &key, &closed.content);
            }
            series.push(closed);
        }
        let complete = series.iter().all(Option::is_some) && self.close_states(number, &series)?;
        self.outcome.products.insert(step.name.clone(), Product::Series(series));
        self.complete(number, complete);
        Ok(())
    }

    /// Gathers the kept configurations of the complete points: on record, and as a table. False where that broke.
    fn close_states(&mut self, number: usize, series: &[Option<Series>]) -> Result<bool, Stop> {
        let step = &self.study.pipeline.steps[number];
        let (mut values, mut points) = (Vec::new(), Vec::new());
        for series in series.iter().flatten().filter(|series| !series.kept.is_empty()) {
            values.extend(series.point.states_value(&series.columns));
            let (columns, kept) = (series.columns.clone(), series.kept.clone());
            points.push(StatesOf { columns, starts: series.point.starts(), kept });
        }
        if points.is_empty() {
            return Ok(true);
        }
        let preimage = states_preimage(values);
        let key = Key::of(&preimage);
        let file = format!("{}.states.parquet", step.name);
        let known = self.index.get(&key).map(|line| line.content);
        if known.is_some_and(|content| self.results.keep(&step.name, &file, &key, &content)) {
            return Ok(true);
        }
        let several = points.iter().any(|point| point.starts.len() > 1);
        let path = Some(self.results.path(&file));
        let job = StatesJob { preimage, publish: known.is_none(), points, several, path, pipeline: None };
        let words = "kept configurations".to_owned();
        let item = Item { step: number, point: 0, words, job: Job::States(job), cost: 0.0 };
        self.results.announce([(step.name.as_str(), file.as_str(), key)].into_iter())?;
        if !self.execute(&[item], false)?.is_empty() {
            return Ok(false);
        }
        if let Some(line) = self.index.get(&key) {
            self.results.wrote(&step.name, &file, &key, &line.content);
        }
        Ok(true)
    }

    pub(super) fn close_analysis(
        &mut self,
        number: usize,
        plan: AnalysisPlan,
        broken: &BTreeSet<(usize, usize)>,
    ) -> Result<(), Stop> {
        let step = &self.study.pipeline.steps[number];
        let kind = kind_of(step);
        let whole = plan.parcels.iter().all(Option::is_some) && broken.iter().all(|(s, _)| *s != number);
        let parcels: Vec<Parcel> = plan.parcels.into_iter().flatten().collect();
        let on_record = parcels.iter().all(|parcel| self.index.get(&parcel.key).is_some());
        if !whole || !on_record || parcels.is_empty() {
            self.outcome.products.insert(step.name.clone(), Product::Incomplete);
            self.complete(number, false);
            return Ok(());
        }
        let gathered = match kind.split {
            Split::Points | Split::Groups => gather::gather(kind, &parcels, self.ledger, &mut self.index, self.text),
            _ => Ok(self
                .index
                .get(&parcels[0].key)
                .map_or((parcels[0].key, ContentHash([0; 32])), |l| (l.key, l.content))),
        };
        // A journal may name what someone has removed or damaged since: that breaks this step, not the run.
        let read = gathered.and_then(|(key, content)| Ok((key, content, self.ledger.read_record(&key)?)));
        let (key, content, record) = match read {
            Ok(read) => read,
            Err(Failure::Broken(message)) => {
                self.break_step(number, &message);
                return Ok(());
            }
            Err(Failure::Disk(message)) => return Err(Stop::Failed(message)),
        };
        // As it is called in the results, and where it stands.
        let tables = record.tables.iter().map(|table| format!("{}.parquet", table.name));
        let files: Vec<(String, PathBuf)> = tables
            .chain(record.files.iter().map(|file| file.name.clone()))
            .map(|name| {
                let path = self.ledger.entry(&key).join(&name);
                (format!("{}.{}", step.name, name.strip_prefix("main.").unwrap_or(&name)), path)
            })
            .collect();
        let due: Vec<&str> = files
            .iter()
            .filter(|(file, _)| !self.results.keep(&step.name, file, &key, &content))
            .map(|(file, _)| file.as_str())
            .collect();
        self.results.announce(due.iter().map(|file| (step.name.as_str(), *file, key)))?;
        for (file, path) in files.iter().filter(|(file, _)| due.contains(&file.as_str())) {
            self.results.copy(&step.name, file, &key, &content, path)?;
        }
        self.outcome.products.insert(step.name.clone(), Product::Tables { key, content });
        self.complete(number, true);
        Ok(())
    }

    /// Ties the results together.
    pub(super) fn finish(&mut self, options: &RunOptions, wanted: &BTreeSet<usize>) -> Result<(), Stop> {
        let pipeline = &self.study.pipeline;
        let mut about = serde_json::Map::new();
        let mut steps = serde_json::Map::new();
        for step in &pipeline.steps {
            let key = match self.outcome.products.get(&step.name) {
                Some(Product::Tables { key, .. }) => serde_json::json!(key),
                Some(Product::Series(series)) => {
                    serde_json::json!(series.iter().map(|s| s.as_ref().map(|s| s.key)).collect::<Vec<_>>())
                }
                _ => serde_json::Value::Null,
            };
            let entry = serde_json::json!({ "does": step.does, "needs": step.needs, "entry": key });
            steps.insert(step.name.clone(), entry);
        }
        about.insert("record".into(), 1.into());
        about.insert("pipeline".into(), pipeline.name.clone().into());
        about.insert("title".into(), serde_json::json!(pipeline.title));
        about.insert("seed".into(), pipeline.seed.into());
        about.insert("units".into(), pipeline.units.word().into());
        about.insert("program".into(), serde_json::json!(program::program()));
        about.insert("only".into(), serde_json::json!(options.only));
        about.insert("steps".into(), steps.into());
        about.insert("text".into(), pipeline.text.clone().into());
        // Results of steps that were not asked for now stay as they are.
        let idle = pipeline.steps.iter().enumerate().filter(|(number, _)| !wanted.contains(number));
        let idle: BTreeSet<&str> = idle.map(|(_, step)| step.name.as_str()).collect();
        Ok(self.results.finish(about, &idle)?)
    }
}
