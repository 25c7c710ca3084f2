//! Rules against lattices: chains that are advanced together, one lattice packed by sites, couplings of the same strength.

use spinledger_pipeline::Point;
use spinledger_plan::lanes::{Misfit, misfit, rule_lanes};
use spinledger_terms::{Item, ItemKind, Problem, Value, Vocabulary};

/// Parameters of a model with couplings by class spread over the classes of the lattice, so that conditions see those that are left out: the longest name
/// wins, classes without one get 0.
pub(super) fn by_class(parameters: Option<&Value>, model: &Item, lattice: &Item) -> Option<Value> {
    let mut parameters = parameters?.clone();
    let (Some(model), Some(lattice)) = (&model.model, &lattice.lattice) else { return Some(parameters) };
    for name in model.by_class.iter().filter(|_| !lattice.classes.is_empty()) {
        let Some(Value::Map(map)) = parameters.at(name) else { continue };
        let covers = |key: &str, class: &str| {
            class.strip_prefix(key).is_some_and(|rest| rest.is_empty() || rest.starts_with('.'))
        };
        let spread = |class: &String| {
            let named = map.iter().filter(|(key, _)| covers(key, class)).max_by_key(|(key, _)| key.len());
            named.map_or(Value::Number(0.0), |(_, value)| value.clone())
        };
        let spread = Value::List(lattice.classes.iter().map(spread).collect());
        parameters.set(name, spread);
    }
    Some(parameters)
}

/// A rule that is to pack one lattice by sites must be able to.
pub(super) fn check_packing(
    point: &Point,
    body: &Value,
    place: &str,
    rule: &Item,
    lattice: &Item,
    able: &[&str],
    problems: &mut Vec<Problem>,
) {
    let Some(traits) = &rule.update else { return };
    let parameter = format!("{place}.{}", traits.lanes);
    let (Some(together), Some(1)) = (traits.together, body.at(&parameter).and_then(Value::as_i64)) else { return };
    let Some(misfit) = misfit(rule, body.get("lattice").unwrap_or(&Value::Null), lattice) else { return };
    let why = match &misfit {
        Misfit::Cells => format!("the lattice `{}` has no cells that it could pack", lattice.name),
        Misfit::Boundary => "some boundary is not periodic".into(),
        Misfit::Size(sizes) => {
            let sizes: Vec<String> = sizes.iter().map(|(n, ..)| n.to_string()).collect();
            format!("a size of {} does not fit its layout", sizes.join(" x "))
        }
    };
    let mut expected = format!("`{}: {together}`, or none, which chooses by size", traits.lanes);
    if let Misfit::Size(sizes) = &misfit {
        let near = |below: &Option<u64>, above: &u64| match below {
            Some(below) if below != above => format!("{below} or {above}"),
            _ => above.to_string(),
        };
        let near: Vec<String> = sizes.iter().map(|(_, below, above)| near(below, above)).collect();
        expected += &format!("; or the nearest size that fits: {}", near.join(" x "));
    }
    let others: Vec<&str> = able.iter().copied().filter(|name| *name != rule.name).collect();
    if !others.is_empty() {
        expected += &format!("; or one of the rules: {}", others.join(", "));
    }
    let message = format!("the rule `{}` cannot pack this lattice by sites: {why}", rule.name);
    let problem = Problem::at_value(&point.place(&parameter), message).expected(expected);
    let named = lattice.lattice.as_ref().map(|lattice| (&lattice.size, lattice.boundaries.as_ref()));
    problems.push(match (&misfit, named) {
        (Misfit::Size(_), Some((size, _))) => problem.other(point.place(&format!("lattice.{size}")), "the size"),
        (Misfit::Boundary, Some((_, Some(b)))) => {
            problem.other(point.place(&format!("lattice.{}", b.parameter)), "the boundary")
        }
        _ => problem,
    });
}

/// Rules of one sweep must advance the same number of chains together.
pub(super) fn check_lanes(
    vocabulary: &Vocabulary,
    point: &Point,
    update: &Value,
    body: &Value,
    lattice: &Item,
    problems: &mut Vec<Problem>,
) {
    let rules = update.as_list().unwrap_or(std::slice::from_ref(update));
    let lanes: Vec<u32> = rules
        .iter()
        .filter_map(|rule| {
            let (_, item) = vocabulary.item(ItemKind::Update, rule.get("plugin")?.as_str()?)?;
            Some(rule_lanes(rule, item, body.get("lattice")?, lattice))
        })
        .collect();
    if let Some(i) = lanes.iter().position(|n| *n != lanes[0]) {
        let message = format!("this rule advances {} chains together, the first {}", lanes[i], lanes[0]);
        let problem = Problem::at_value(&point.place(&format!("update.{i}")), message);
        problems.push(problem.expected("rules with the same `lanes`").other(point.place("update.0"), "the first rule"));
    }
}
