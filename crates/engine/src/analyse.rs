//! One analysis parcel: tables and files from series and tables.

use crate::failure::Failure;
use crate::job::{AnalyseJob, Entry, Report};
use crate::line::Line;
use crate::loaded::Loaded;
use crate::program;
use crate::steps::{self, Task};
use spinledger_ledger::{Claim, Draft, Input, Ledger, Payload};
use spinledger_plan::dynamics::ItemRef;
use spinledger_terms::Key;
use std::cell::RefCell;
use std::time::Instant;

/// Does the parcel.
///
/// # Errors
/// Why it was not done.
pub(crate) fn analyse(job: &AnalyseJob, ledger: &Ledger, loaded: &mut Loaded, line: &Line) -> Result<Report, Failure> {
    if let Some(reason) = &job.refused {
        return Err(Failure::Broken(reason.clone()));
    }
    let key = Key::of(&job.preimage);
    let _claim = match ledger.claim(&key, &job.does)? {
        Claim::Mine(guard) => guard,
        Claim::Theirs { host, pid, .. } => return Ok(Report::Held { by: format!("process {pid} on {host}") }),
    };
    if let Some(found) = ledger.lookup(&key)? {
        return Ok(Report::Done { computed: false, updates: 0, entries: vec![Entry::of(&found)] });
    }
    let kind = steps::kind(&job.does).ok_or_else(|| format!("there is no step kind `{}`", job.does))?;
    let mut provenance = program::provenance(job.parameters.clone(), 1);
    let started = Instant::now();
    let progress = || line.progress(0);
    let loaded = RefCell::new(loaded);
    let problem = |lattice: &ItemRef, model: &ItemRef| loaded.borrow_mut().problem_of(lattice, model);
    let task = Task {
        parameters: &job.parameters,
        series: &job.series,
        tables: &job.tables,
        state: job.state.as_ref(),
        problem: &problem,
        units: &job.units,
        ledger,
        progress: &progress,
    };
    let output = (kind.analyse)(&task)?;
    let series = job.series.iter().map(|s| Input { name: s.role.clone(), key: s.key, content: s.content });
    let tables_in = job.tables.iter().map(|t| Input { name: t.role.clone(), key: t.key, content: t.content });
    let state = job.state.iter().map(|s| Input { name: s.role.clone(), key: s.key, content: s.content });
    provenance.inputs = series.chain(tables_in).chain(state).collect();
    provenance.plugins = job.state.iter().flat_map(|s| [&s.lattice, &s.model]).map(|i| i.identity.clone()).collect();
    provenance.seconds = started.elapsed().as_secs_f64();
    provenance.finished = spinledger_ledger::now();
    provenance.pipeline = job.pipeline;
    let seconds = provenance.seconds;
    let mut draft = Draft::new(&job.preimage, &job.does, provenance);
    for (name, table) in output.tables {
        draft = draft.table(&name, Payload::Table(table));
    }
    for (name, bytes) in output.files {
        draft = draft.file(&name, bytes);
    }
    let published = ledger.publish(draft)?;
    let entry = Entry {
        key,
        kind: job.does.clone(),
        chain: None,
        content: published.content,
        seconds,
        updates: 0,
        note: String::new(),
    };
    Ok(Report::Done { computed: published.fresh, updates: 0, entries: vec![entry] })
}
