//! Closing a step. A point: its blocks are complete, so its series gets an entry (a record without tables of its own), and its file in the folder of results.

use crate::failure::Failure;
use crate::job::{CloseJob, Entry, Report, SeriesNote, StatesJob};
use crate::line::Line;
use crate::program;
use spinledger_ledger::{
    Constant, Draft, Input, Ledger, Part, Piece as FilePiece, assemble, combine, content_of_block, content_of_entry,
    join,
};
use spinledger_plan::sample::Piece;
use spinledger_terms::{ContentHash, Key, Value};

/// Publishes the series where it is not on record, and writes its file where that is asked for.
///
/// # Errors
/// Where the ledger cannot be read or written.
pub(crate) fn close(job: &CloseJob, ledger: &Ledger, line: &Line) -> Result<Report, Failure> {
    let key = Key::of(&job.preimage);
    let first = job.pieces.first().ok_or("a series without blocks")?;
    let record = ledger.read_record(&first.key)?;
    let note = SeriesNote::from_value(&record.provenance.facts).ok_or("the record of a block lacks its facts")?;
    let mut entries = Vec::new();
    if job.publish {
        let content = content(&job.pieces, ledger, line)?;
        let mut provenance = program::provenance(job.parameters.clone(), 1);
        provenance.inputs = job.pieces.iter().map(|piece| input(job, piece)).collect();
        provenance.finished = spinledger_ledger::now();
        provenance.pipeline = job.pipeline;
        provenance.facts = note.to_value();
        let draft = Draft::new(&job.preimage, "series", provenance).content(content);
        let published = ledger.publish(draft)?;
        entries.push(Entry {
            key,
            kind: "series".into(),
            chain: None,
            content: published.content,
            seconds: 0.0,
            updates: 0,
            note: note.to_value().canonical(),
        });
    }
    if let Some(layout) = &job.layout {
        let constant = |name: &str, unit: &str, value: &Value| Constant {
            name: name.to_owned(),
            unit: unit.to_owned(),
            value: value.clone(),
        };
        let mut constants: Vec<Constant> = layout.columns.iter().map(|(n, u, v)| constant(n, u, v)).collect();
        constants.push(constant("sites", "", &Value::Integer(note.sites as i64)));
        let several = job.starts.len() > 1;
        let pieces = job.pieces.iter().map(|piece| {
            line.progress(0);
            FilePiece {
                path: ledger.table_path(&piece.key, "main"),
                rows: piece.rows,
                chain: i64::from(piece.chain),
                extra: if several {
                    vec![constant("start", "", &Value::text(&job.starts[piece.start]))]
                } else {
                    Vec::new()
                },
            }
        });
        assemble(ledger.writes(), &layout.path, &key, &constants, pieces)?;
    }
    Ok(Report::Done { computed: false, updates: 0, entries })
}

/// Publishes the record of a step's kept configurations where it is not there, and writes their table where that is asked for.
///
/// # Errors
/// Where the ledger cannot be read or written.
pub(crate) fn close_states(job: &StatesJob, ledger: &Ledger, line: &Line) -> Result<Report, Failure> {
    let key = Key::of(&job.preimage);
    let mut entries = Vec::new();
    if job.publish {
        let all = || job.points.iter().flat_map(|point| point.kept.iter().map(move |kept| (point, kept)));
        let contents: Vec<ContentHash> = all().map(|(_, kept)| kept.content).collect();
        let mut provenance = program::provenance(Value::Map(Default::default()), 1);
        provenance.inputs = all()
            .map(|(point, kept)| {
                let start = if job.several { format!("{} ", point.starts[kept.start]) } else { String::new() };
                let name = format!("{start}chain {} sweep {}", kept.chain, kept.sweep);
                Input { name, key: kept.key, content: kept.content }
            })
            .collect();
        provenance.finished = spinledger_ledger::now();
        provenance.pipeline = job.pipeline;
        let draft = Draft::new(&job.preimage, "states", provenance).content(combine("states", &contents));
        let content = ledger.publish(draft)?.content;
        let kind = "states".to_owned();
        entries.push(Entry { key, kind, chain: None, content, seconds: 0.0, updates: 0, note: String::new() });
    }
    if let Some(path) = &job.path {
        let parts = job.points.iter().flat_map(|point| {
            point.kept.iter().map(move |kept| {
                line.progress(0);
                let constant = |name: &str, unit: &str, value: Value| Constant {
                    name: name.to_owned(),
                    unit: unit.to_owned(),
                    value,
                };
                let mut constants: Vec<Constant> =
                    point.columns.iter().map(|(name, unit, value)| constant(name, unit, value.clone())).collect();
                if job.several {
                    constants.push(constant("start", "", Value::text(&point.starts[kept.start])));
                }
                constants.push(constant("chain", "", Value::Integer(kept.chain.into())));
                constants.push(constant("sweep", "sweeps", Value::Integer(kept.sweep as i64)));
                Part { path: ledger.table_path(&kept.key, "main"), constants }
            })
        });
        join(ledger.writes(), path, &key, parts)?;
    }
    Ok(Report::Done { computed: false, updates: 0, entries })
}

fn input(job: &CloseJob, piece: &Piece) -> Input {
    let start = if job.starts.len() > 1 { format!("{} ", job.starts[piece.start]) } else { String::new() };
    Input {
        name: format!("{start}chain {} block {}", piece.chain, piece.block),
        key: piece.key,
        content: piece.content,
    }
}

/// The content of a series: of its pieces, in order of rows. Only pieces that are taken in part are read.
fn content(pieces: &[Piece], ledger: &Ledger, line: &Line) -> Result<ContentHash, Failure> {
    let mut parts = Vec::with_capacity(pieces.len());
    for piece in pieces {
        line.progress(0);
        if piece.rows == piece.recorded {
            parts.push(piece.content);
        } else {
            let rows = Some(piece.rows as usize);
            let block = ledger.read_block(&piece.key, "main", None, rows)?;
            // As the entry of a block recorded at this length.
            parts.push(content_of_entry([("main", content_of_block(&block))].into_iter()));
        }
    }
    Ok(combine("series", &parts))
}
