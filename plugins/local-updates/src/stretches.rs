//! Stretches of visits whose neighbours stand alike.
//!
//! States are kept in order of visits (`ordered.rs`): on a regular lattice the neighbours of consecutive visits are then consecutive too, but for
//! the ends of rows. A stretch is such a sequence, with the few visits that are otherwise listed, so that they neither break the order of draws nor
//! the vectors.

use crate::plan::Plan;
use std::ops::Range;

/// Fewest visits that are worth a vector.
const SHORTEST: usize = 16;

/// Visits in order.
#[derive(Clone, Debug, PartialEq, Eq)]
pub(crate) enum Piece {
    /// Neighbours at constant distances.
    Alike(Stretch),
    /// One after the other.
    Single(Visits),
}

/// Visits of one kind.
#[derive(Clone, Copy, Debug, PartialEq, Eq)]
pub(crate) struct Visits {
    /// Their kind.
    pub(crate) kind: u32,
    /// Where they begin in [`Plan::stars`].
    pub(crate) stars: usize,
    /// How many.
    pub(crate) count: usize,
}

/// Visits whose neighbours stand at constant distances.
#[derive(Clone, Debug, PartialEq, Eq)]
pub(crate) struct Stretch {
    /// Kind of the visits.
    pub(crate) kind: u32,
    /// Where the state of the first is.
    pub(crate) first: usize,
    /// How many.
    pub(crate) count: usize,
    /// Where the state of each neighbour of the first is, in [`Stretches::starts`].
    pub(crate) starts: Range<usize>,
    /// Visits that are otherwise, in [`Stretches::patches`].
    pub(crate) patches: Range<usize>,
}

/// A visit in a stretch that is otherwise: of another kind, or with neighbours elsewhere.
#[derive(Clone, Copy, Debug, PartialEq, Eq)]
pub(crate) struct Patch {
    /// Which of the visits.
    pub(crate) visit: usize,
    /// The visit by itself.
    pub(crate) single: Visits,
}

/// A sweep in pieces.
#[derive(Debug, Default)]
pub(crate) struct Stretches {
    /// In order of visits.
    pub(crate) pieces: Vec<Piece>,
    /// Distances go over more bytes than there are before the states, so that a neighbour may seem to stand before the first byte.
    pub(crate) starts: Vec<i64>,
    /// Ascending in each stretch.
    pub(crate) patches: Vec<Patch>,
    /// Visits in stretches.
    pub(crate) covered: usize,
}

/// The plan, visit by visit.
struct Walk<'p> {
    plan: &'p Plan,
    run: usize,
}

impl<'p> Walk<'p> {
    /// A visit by itself. Cheap where visits are asked for about in order.
    fn at(&mut self, visit: usize) -> Option<Visits> {
        let runs = &self.plan.runs;
        while runs[self.run].first > visit {
            self.run -= 1;
        }
        while runs[self.run].first + runs[self.run].count <= visit {
            self.run += 1;
        }
        let run = &runs[self.run];
        let kind = run.kind?;
        let width = self.plan.kinds[kind as usize].width;
        Some(Visits { kind, stars: run.stars + (visit - run.first) * width, count: 1 })
    }

    fn star(&self, single: Visits) -> &'p [u32] {
        &self.plan.stars[single.stars..][..self.plan.kinds[single.kind as usize].width]
    }

    /// Whether the second visit is as the first, as many visits later.
    fn are_alike(&mut self, one: usize, other: usize) -> bool {
        let (Some(a), Some(b)) = (self.at(one), self.at(other)) else { return false };
        if a.kind != b.kind {
            return false;
        }
        let (a, b, later) = (self.star(a), self.star(b), (other - one) as u32);
        if a.iter().zip(b).all(|(a, b)| a + later == *b) {
            return true;
        }
        // In any order: the kind counts neighbours.
        let sorted = |star: &[u32], later: u32| {
            let mut neighbours: Vec<u32> = star[1..].iter().map(|n| n + later).collect();
            neighbours.sort_unstable();
            neighbours
        };
        sorted(a, later) == sorted(b, 0)
    }
}

impl Stretches {
    /// Looks for stretches; none where a visit has no table. `serves` says which kinds may be in them, `colours` where each colour ends. Cost: one
    /// pass.
    pub(crate) fn new(plan: &Plan, serves: &[bool], colours: &[usize]) -> Option<Self> {
        if plan.runs.iter().any(|run| run.kind.is_none()) {
            return None;
        }
        let mut out = Stretches::default();
        let mut walk = Walk { plan, run: 0 };
        let mut first = 0;
        for &end in colours {
            while first < end {
                first = out.stretch(&mut walk, serves, first, end)?;
            }
        }
        Some(out)
    }

    /// Adds the stretch that begins with a visit; where the next one begins.
    fn stretch(&mut self, walk: &mut Walk<'_>, serves: &[bool], first: usize, end: usize) -> Option<usize> {
        // Where a row begins, the first visit is often the one that is otherwise.
        let strange = first + 2 < end && !walk.are_alike(first, first + 1) && walk.are_alike(first + 1, first + 2);
        let model = if strange { first + 1 } else { first };
        let patches = self.patches.len();
        if strange {
            self.patches.push(Patch { visit: 0, single: walk.at(first)? });
        }
        let mut last = model;
        for visit in model + 1..end {
            if walk.are_alike(model, visit) {
                last = visit;
                continue;
            }
            // Otherwise by itself, or the beginning of something else?
            let goes_on = visit + 1 < end && walk.are_alike(model, visit + 1);
            let alone = visit + 1 == end || !walk.are_alike(visit, visit + 1);
            if !goes_on && (!alone || last + 1 < visit) {
                break;
            }
            self.patches.push(Patch { visit: visit - first, single: walk.at(visit)? });
            if !goes_on {
                last = visit;
                break;
            }
        }
        let count = last + 1 - first;
        let single = walk.at(model)?;
        if count >= SHORTEST && serves[single.kind as usize] && 2 * (self.patches.len() - patches) <= count {
            let star = walk.star(single);
            let back = (model - first) as i64;
            let starts = self.starts.len();
            self.starts.extend(star[1..].iter().map(|n| i64::from(*n) - back));
            self.pieces.push(Piece::Alike(Stretch {
                kind: single.kind,
                first: star[0] as usize - (model - first),
                count,
                starts: starts..self.starts.len(),
                patches: patches..self.patches.len(),
            }));
            self.covered += count;
        } else {
            self.patches.truncate(patches);
            for visit in first..=last {
                let single = walk.at(visit)?;
                match self.pieces.last_mut() {
                    // Those of a kind that follow each other are one piece, unless a colour ends: draws are taken alike either way.
                    Some(Piece::Single(visits))
                        if visits.kind == single.kind
                            && visits.stars + visits.count * walk.plan.kinds[single.kind as usize].width
                                == single.stars =>
                    {
                        visits.count += 1;
                    }
                    _ => self.pieces.push(Piece::Single(single)),
                }
            }
        }
        Some(last + 1)
    }
}
