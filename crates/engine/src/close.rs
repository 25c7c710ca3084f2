//! Closing a point: its blocks are complete, so its series gets an entry (a record without tables of its own), and its file in the folder of results.

use crate::failure::Failure;
use crate::job::{CloseJob, Entry, Report, SeriesNote};
use crate::line::Line;
use crate::program;
use spinledger_ledger::{
    Constant, Draft, Input, Ledger, Piece as FilePiece, assemble, combine, content_of_block, content_of_entry,
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
