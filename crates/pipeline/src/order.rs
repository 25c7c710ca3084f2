//! Steps in the order of their dependence.

use spinledger_terms::{Path, Problem, nearest};
use std::collections::{BTreeMap, VecDeque};

/// A reference from one step to another, by their numbers in the file, with its place.
struct Edge {
    to: usize,
    place: Path,
}

/// Numbers of the steps so that each comes after those it refers to, ties in the order of the file. `line` tells the line of a
/// step's name.
///
/// # Errors
/// Every reference to a step that is not there or to itself, and every circle, once.
pub(crate) fn order(
    names: &[String],
    references: &[Vec<(Path, String)>],
    line: &dyn Fn(&str) -> usize,
    problems: &mut Vec<Problem>,
) -> Vec<usize> {
    let number: BTreeMap<&str, usize> = names.iter().enumerate().map(|(i, name)| (name.as_str(), i)).collect();
    let mut edges: Vec<Vec<Edge>> = Vec::new();
    for (from, references) in references.iter().enumerate() {
        let mut out = Vec::new();
        for (place, name) in references {
            match number.get(name.as_str()) {
                None => {
                    let others = || names.iter().map(String::as_str).filter(|n| *n != names[from]);
                    let expected = match others().count() {
                        0 => "another step, but there is none".to_owned(),
                        _ => format!("one of: {}", others().collect::<Vec<_>>().join(", ")),
                    };
                    let problem = Problem::at_value(place, format!("there is no step `{name}`"));
                    problems.push(problem.expected(expected).nearest(nearest(name, others())));
                }
                Some(to) if *to == from => {
                    problems.push(Problem::at_value(place, format!("the step `{name}` refers to itself")));
                }
                Some(to) => out.push(Edge { to: *to, place: place.clone() }),
            }
        }
        edges.push(out);
    }
    let mut done = vec![false; names.len()];
    let mut sorted = Vec::new();
    while let Some(next) = (0..names.len()).find(|i| !done[*i] && edges[*i].iter().all(|e| done[e.to])) {
        done[next] = true;
        sorted.push(next);
    }
    let mut told = done;
    for start in 0..names.len() {
        if told[start] {
            continue;
        }
        if let Some(circle) = circle(start, &edges) {
            problems.push(in_words(&circle, names, line));
            circle.iter().for_each(|(step, _)| told[*step] = true);
        }
    }
    sorted
}

/// The shortest way from a step back to itself: its steps, each with the place of its reference to the next.
fn circle(start: usize, edges: &[Vec<Edge>]) -> Option<Vec<(usize, &Path)>> {
    let mut came: Vec<Option<(usize, &Path)>> = vec![None; edges.len()];
    let mut queue = VecDeque::from([start]);
    while let Some(step) = queue.pop_front() {
        for edge in &edges[step] {
            if came[edge.to].is_some() {
                continue;
            }
            came[edge.to] = Some((step, &edge.place));
            if edge.to != start {
                queue.push_back(edge.to);
                continue;
            }
            let mut circle = Vec::new();
            let mut at = start;
            while let Some((before, place)) = came[at] {
                circle.push((before, place));
                at = before;
                if at == start {
                    break;
                }
            }
            circle.reverse();
            return Some(circle);
        }
    }
    None
}

fn in_words(circle: &[(usize, &Path)], names: &[String], line: &dyn Fn(&str) -> usize) -> Problem {
    let name = |i: usize| names[circle[i % circle.len()].0].as_str();
    let mut message = format!("steps wait for each other in a circle: `{}` (line {})", name(0), line(name(0)));
    for i in 1..circle.len() {
        let which = if i > 1 { ", which" } else { "" };
        message.push_str(&format!("{which} needs `{}` (line {})", name(i), line(name(i))));
    }
    message.push_str(&format!(", which needs `{}`", name(0)));
    let problem = Problem::at_value(circle[0].1, message);
    problem.other(circle[1 % circle.len()].1.clone(), format!("`{}` needs `{}` here", name(1), name(2)))
}
