//! `spinledger plugins`: what is found, or what one item is.

use crate::args::PluginsArgs;
use crate::commands::{WELL, WRONG};
use crate::screen::{Screen, Style, complain};
use crate::text::columns;
use serde_json::json;
use spinledger_host::{Catalogue, Search};
use spinledger_terms::{Field, Identity, Item, ItemKind, Value, nearest};

/// Lists or documents.
pub(crate) fn plugins(args: &PluginsArgs) -> anyhow::Result<u8> {
    let mut screen = Screen::new(if args.json { Style::Json } else { Style::Person });
    let catalogue = Catalogue::find(&Search::usual(&[]));
    let items = catalogue.items();
    match &args.name {
        None => list(&catalogue, &items, &mut screen),
        Some(name) => {
            let named: Vec<&(Identity, Item)> = items.iter().filter(|(_, item)| item.name == *name).collect();
            if named.is_empty() {
                let near = nearest(name, items.iter().map(|(_, item)| item.name.as_str()));
                let near = near.map_or(String::new(), |near| format!("; the nearest is `{near}`"));
                complain(&format!("spinledger: there is no plugin `{name}`{near}"));
                return Ok(WRONG);
            }
            for (identity, item) in named {
                document(identity, item, &mut screen);
            }
        }
    }
    Ok(WELL)
}

fn list(catalogue: &Catalogue, items: &[(Identity, Item)], screen: &mut Screen) {
    for (identity, item) in items {
        screen.event(&json!({ "event": "item", "identity": identity, "item": item }));
    }
    for kind in [ItemKind::Lattice, ItemKind::Model, ItemKind::Update, ItemKind::Observable] {
        let mut rows = Vec::new();
        for (identity, item) in items.iter().filter(|(_, item)| item.kind == kind) {
            let from = if identity.standard { String::new() } else { format!("({})", identity.file) };
            rows.push(vec![format!("  {}", item.name), item.about.clone(), from]);
        }
        if !rows.is_empty() {
            screen.line(&format!("{kind}s"));
            columns(&rows, &[]).iter().for_each(|line| screen.line(line));
        }
    }
    if items.is_empty() {
        screen.line(
            "no plugins found; they are looked for beside the program, in ../lib/spinledger and in SPINLEDGER_PLUGINS",
        );
    }
    for refusal in catalogue.refusals() {
        screen.trouble(&format!("not usable: {}", spinledger_engine::chain_text(&refusal.error)));
    }
}

fn document(identity: &Identity, item: &Item, screen: &mut Screen) {
    screen.event(&json!({ "event": "item", "identity": identity, "item": item }));
    screen.line(&format!("{} `{}`", item.kind, item.name));
    screen.line(&format!("  {}", item.about));
    if !item.formula.is_empty() {
        screen.line(&format!("  formula: {}", item.formula));
    }
    if !item.source.is_empty() {
        screen.line(&format!("  source: {}", item.source));
    }
    let origin = if identity.standard { "comes with spinledger" } else { "foreign" };
    screen.line(&format!(
        "  library {} {}, revision {}, {origin}: {}",
        identity.library, identity.version, item.revision, identity.file
    ));
    let rows: Vec<Vec<String>> = item.parameters.iter().map(parameter).collect();
    if !rows.is_empty() {
        screen.line("  parameters");
        columns(&rows, &[]).iter().for_each(|line| screen.line(line));
    }
    for line in serves(item) {
        screen.line(&format!("  {line}"));
    }
    screen.line("  example");
    screen.line(&format!("    {}", example(item)));
}

fn parameter(field: &Field) -> Vec<String> {
    let default = match &field.default {
        Some(value) => format!("default {}", value.canonical()),
        None if field.required => "required".into(),
        None => String::new(),
    };
    let unit = if field.unit.is_empty() { String::new() } else { format!("[{}]", field.unit) };
    vec![format!("    {}", field.name), unit, default, format!("{} ({})", field.about, field.kind.what())]
}

fn serves(item: &Item) -> Vec<String> {
    let mut lines = Vec::new();
    if let Some(lattice) = &item.lattice {
        lines.push(format!(
            "{} directions, {} sites a cell; bond classes: {}",
            lattice.dimension,
            lattice.sites_per_cell,
            lattice.classes.join(", ")
        ));
    }
    if let Some(model) = &item.model {
        lines.push(format!("energies of the form: {}", model.forms.join(", ")));
        let offers: Vec<&str> = model.offers.iter().map(|t| t.name.as_str()).collect();
        lines.push(format!("offers: {}", offers.join(", ")));
    }
    if let Some(update) = &item.update {
        lines.push(format!("serves energies of the form: {}", update.forms.join(", ")));
        if !update.needs.is_empty() {
            lines.push(format!("needs of the model: {}", update.needs.join(", ")));
        }
    }
    if let Some(observable) = &item.observable {
        let names: Vec<&str> = observable.columns.iter().map(|c| c.name.as_str()).collect();
        lines.push(format!(
            "columns: {}",
            if names.is_empty() { "depend on parameters".into() } else { names.join(", ") }
        ));
        if !observable.needs.is_empty() {
            lines.push(format!("needs of the model: {}", observable.needs.join(", ")));
        }
    }
    lines
}

/// A line to paste: required parameters with a value of their kind, and those with defaults left to them.
fn example(item: &Item) -> String {
    let mut parts = vec![format!("plugin: {}", item.name)];
    for field in item.parameters.iter().filter(|f| f.required) {
        parts.push(format!("{}: {}", field.name, sample_value(field)));
    }
    let key = if item.kind == ItemKind::Observable { "observe: [" } else { "" };
    let body = if parts.len() == 1 { item.name.clone() } else { format!("{{ {} }}", parts.join(", ")) };
    match item.kind {
        ItemKind::Observable => format!("{key}{body}]"),
        kind => format!("{kind}: {{ {} }}", parts.join(", ")),
    }
}

fn sample_value(field: &Field) -> String {
    use spinledger_terms::Kind;
    fn of(kind: &Kind) -> String {
        match kind {
            Kind::Integer { min, .. } => min.unwrap_or(1).max(3).to_string(),
            Kind::Number { .. } => "1.0".into(),
            Kind::Word { of } => of.first().cloned().unwrap_or_default(),
            Kind::Boolean {} => "true".into(),
            Kind::Either { of: kinds } => kinds.first().map(of).unwrap_or_default(),
            Kind::List { of: kind, .. } => format!("[{}]", of(kind)),
            _ => Value::Null.canonical(),
        }
    }
    if field.name == "size" { "16".into() } else { of(&field.kind) }
}
