//! Timing a rule in turn with plain code.

use super::baseline::{Baseline, Plain};
use super::named::Case;
use super::spread::Spread;
use crate::failure::Failure;
use serde::Serialize;
use spinledger_host::{Energy, Graph, HostError, Loader, Observer, Sampler, Services, measure_all, ordered_start};
use spinledger_numerics::random::StreamKey;
use spinledger_plan::dynamics::{Dynamics, ItemRef};
use std::sync::Arc;
use std::time::{Duration, Instant};

/// How long a round of one of the things in turn is to take.
const ROUND: f64 = 0.05;
/// A round has the rule, the plain code, and the rule with observing.
const PARTS: f64 = 3.0;
/// Fewest rounds: quartiles of less say nothing.
const FEWEST: usize = 5;
/// Fewest clusters of a round where they are turned over one by one: a single one may be of one site, or of nearly all.
const CLUSTERS: u64 = 8;
/// Share of the time of a case for warming up, on top of it.
const WARM: f64 = 0.2;
/// Shortest time for a case, in seconds: rounds shorter than what this gives are lost in the resolution of the clock.
pub const SHORTEST: f64 = 0.01;

/// How to measure.
#[derive(Clone, Copy, Debug)]
pub struct Settings {
    /// Seconds for each case, at least [`SHORTEST`]; preparing comes on top.
    pub seconds: f64,
    /// Threads lent to rules, at least 1. Plain code runs on one.
    pub threads: usize,
}

/// What is counted as one.
#[derive(Clone, Copy, Debug, PartialEq, Eq, Serialize)]
#[serde(rename_all = "kebab-case")]
pub enum Counted {
    /// Visits of spins, all chains together.
    Updates,
    /// Sites of the lattice in each sweep.
    Sites,
    /// Spins that were turned over.
    Flips,
}

/// What was measured of a case.
#[derive(Clone, Debug, Serialize)]
pub struct Measured {
    /// Free sites of the lattice.
    pub sites: usize,
    /// Chains that the rule advances together.
    pub chains: usize,
    /// Temperature.
    pub temperature: f64,
    /// What is counted.
    pub counted: Counted,
    /// So many of them in a nanosecond, all threads together.
    pub per_nanosecond: Spread,
    /// Which plain version ran in turn.
    pub plain: Plain,
    /// Side and temperature of its square lattice.
    pub plain_side: usize,
    /// As above.
    pub plain_temperature: f64,
    /// Of the plain version, on one thread.
    pub plain_per_nanosecond: Spread,
    /// How many times as fast as the plain version, round by round; None where the two count different things.
    pub ratio: Option<Spread>,
    /// What observing after each sweep costs, as a part of the sweep (0.3: 30% on top).
    pub observing: Spread,
    /// What was observed: the columns.
    pub observed: Vec<String>,
    /// Size of the saved state, in bytes for each spin.
    pub state_bytes: f64,
    /// Which of the rule's code ran, as it says; may be empty.
    pub path: String,
    /// Threads lent to the rule.
    pub threads: usize,
    /// Rounds, and how long the rule itself was timed in a typical one, in seconds.
    pub rounds: usize,
    /// As above.
    pub round_seconds: f64,
}

/// What is loaded.
pub struct Bench {
    loader: Loader,
    settings: Settings,
    /// The last lattice: the next case often has the same.
    lattice: Option<(ItemRef, Arc<Graph>)>,
}

impl Bench {
    /// Nothing loaded yet. Make one for a process. `log` takes what plugins say.
    ///
    /// # Errors
    /// In words, where threads cannot be had.
    pub fn new(settings: Settings, log: impl Fn(&str) + Send + Sync + 'static) -> Result<Bench, String> {
        let services = Services { threads: settings.threads.max(1), log: Box::new(move |_, text| log(text)) };
        let loader = Loader::new(services).map_err(|error| crate::chain_text(&error))?;
        Ok(Bench { loader, settings, lattice: None })
    }

    /// Times a case. The plugins run in this process: one that crashes ends it.
    ///
    /// # Errors
    /// In words, where a plugin cannot be loaded, refuses or fails.
    pub fn measure(&mut self, case: &Case) -> Result<Measured, String> {
        let told = |failure: Failure| match failure {
            Failure::Broken(text) | Failure::Disk(text) => text,
        };
        let mut timed = self.prepare(&case.dynamics).map_err(told)?;
        timed.measure(&self.settings).map_err(|error| told(error.into()))
    }

    fn graph(&mut self, lattice: &ItemRef) -> Result<Arc<Graph>, HostError> {
        if let Some((_, graph)) = self.lattice.as_ref().filter(|(known, _)| known == lattice) {
            return Ok(graph.clone());
        }
        self.lattice = None;
        let graph = self.loader.lattice(&lattice.identity, &lattice.parameters)?.build()?;
        self.lattice = Some((lattice.clone(), graph.clone()));
        Ok(graph)
    }

    fn prepare(&mut self, dynamics: &Dynamics) -> Result<Timed, Failure> {
        let graph = self.graph(&dynamics.lattice)?;
        let model = self.loader.model(&dynamics.model.identity, &dynamics.model.parameters)?;
        let energy = model.describe(&graph)?;
        let [(rule, times)] = dynamics.update.as_slice() else { return Err("one rule is measured at a time".into()) };
        let stream = StreamKey::from_text("pace");
        let keys: Vec<StreamKey> = (0..dynamics.lanes).map(|lane| stream.lane(lane)).collect();
        let item = self.loader.update(&rule.identity, &rule.parameters)?;
        let mut sampler = item.prepare(&graph, &energy, dynamics.inverse_temperature, &keys, stream)?;
        // From an ordered state even rules that turn over one cluster a sweep are soon among typical ones.
        let start = ordered_start(&energy, &graph);
        for lane in 0..keys.len() {
            sampler.import(lane, &start)?;
        }
        let mut observers = Vec::new();
        for observable in &dynamics.observe {
            let item = self.loader.observable(&observable.identity, &observable.parameters)?;
            observers.push(item.prepare(&graph, &energy)?);
        }
        let width = observers.iter().map(|observer| observer.columns().len()).sum();
        let (baseline, plain_temperature) = Baseline::of(dynamics, graph.sites, &stream);
        let flips = match (&baseline, single_cluster(rule)) {
            (Baseline::Wolff(_), true) => flip_of(&energy, &graph),
            _ => None,
        };
        Ok(Timed {
            sites: graph.sites,
            temperature: dynamics.temperature,
            times: *times,
            flips: flips.filter(|_| keys.len() == 1 && *times == 1),
            values: vec![0.0; width],
            sampler,
            observers,
            baseline,
            plain_temperature,
        })
    }
}

impl std::fmt::Debug for Bench {
    fn fmt(&self, f: &mut std::fmt::Formatter<'_>) -> std::fmt::Result {
        f.debug_struct("Bench").field("settings", &self.settings).finish_non_exhaustive()
    }
}

/// Whether a sweep of this rule is one cluster.
fn single_cluster(rule: &ItemRef) -> bool {
    rule.parameters.get("clusters").is_none_or(|n| n.as_i64() == Some(1))
}

/// By how much the magnetisation changes with each spin of a cluster: known for two values on a lattice without pinned sites.
fn flip_of(energy: &Energy, graph: &Graph) -> Option<f64> {
    match energy.values.as_slice() {
        [a, b] if a != b && graph.sites == graph.total => Some((a - b).abs()),
        _ => None,
    }
}

/// A case, ready to be timed.
struct Timed {
    sites: usize,
    temperature: f64,
    /// How often the rule is done in a sweep.
    times: u64,
    /// Change of the magnetisation for each spin turned over, where these are counted.
    flips: Option<f64>,
    sampler: Sampler,
    observers: Vec<Observer>,
    values: Vec<f64>,
    baseline: Baseline,
    plain_temperature: f64,
}

/// Time that something took and what it counts for.
#[derive(Clone, Copy, Default)]
struct Lap {
    time: Duration,
    work: f64,
}

impl Lap {
    fn rate(self) -> f64 {
        self.work / (self.time.as_secs_f64() * 1e9)
    }
}

impl Timed {
    /// Sweeps by themselves, as a pipeline does them between measurements.
    fn sweeps(&mut self, count: u64) -> Result<Lap, HostError> {
        let Some(flip) = self.flips else {
            let before = Instant::now();
            self.sampler.sweep(count * self.times)?;
            let work = count as f64 * (self.times as f64 * self.sites as f64 * self.sampler.lanes() as f64);
            return Ok(Lap { time: before.elapsed(), work });
        };
        // One by one, with the magnetisation looked at in between and outside of the time: how many spins turn over is known by nothing else.
        let mut lap = Lap::default();
        let mut magnetisation = self.magnetisation()?;
        for _ in 0..count {
            let before = Instant::now();
            self.sampler.sweep(1)?;
            lap.time += before.elapsed();
            let now = self.magnetisation()?;
            lap.work += (now - magnetisation).abs() / flip;
            magnetisation = now;
        }
        Ok(lap)
    }

    fn magnetisation(&mut self) -> Result<f64, HostError> {
        Ok(self.sampler.tallies(0)?.magnetisation.map_or(0.0, |m| m[0]))
    }

    /// Sweeps with everything observed after each, as a pipeline does with a row every sweep; how much longer that takes than without, as a part. Where
    /// sweeps differ much, as clusters do, these sweeps themselves are compared with, and else those of `without`.
    fn observed(&mut self, count: u64, without: Duration) -> Result<f64, HostError> {
        let mut sweeping = Duration::ZERO;
        let before = Instant::now();
        for _ in 0..count {
            let sweep = self.flips.map(|_| Instant::now());
            self.sampler.sweep(self.times)?;
            if let Some(sweep) = sweep {
                sweeping += sweep.elapsed();
            }
            for lane in 0..self.sampler.lanes() {
                measure_all(&mut self.observers, &mut self.sampler, lane, &mut self.values)?;
            }
        }
        let without = if self.flips.is_some() { sweeping } else { without };
        Ok(before.elapsed().as_secs_f64() / without.as_secs_f64().max(1e-9) - 1.0)
    }

    fn measure(&mut self, settings: &Settings) -> Result<Measured, HostError> {
        let seconds = settings.seconds.max(SHORTEST);
        let round = ROUND.min(seconds / (PARTS * FEWEST as f64));
        let fewest = if matches!(self.baseline, Baseline::Wolff(_)) { CLUSTERS } else { 1 };
        let count = warm(seconds * WARM, round, fewest, |count| Ok::<_, HostError>(self.sweeps(count)?.time))?;
        // Flips are to be known: a rule that keeps no magnetisation is counted by sites.
        if self.flips.is_some() && self.sampler.tallies(0)?.magnetisation.is_none() {
            self.flips = None;
        }
        let plain_count = warm(seconds * WARM, round, fewest, |count| {
            let before = Instant::now();
            self.baseline.run(count);
            Ok::<_, HostError>(before.elapsed())
        })?;
        // Observing may take longer than sweeping by much: its rounds are to be of the same length.
        let start = Instant::now();
        self.observed(1, Duration::ZERO)?;
        let observed_count = ((round / start.elapsed().as_secs_f64().max(1e-9)) as u64).clamp(fewest, count);
        let (mut own, mut plain, mut observing) = (Vec::new(), Vec::new(), Vec::new());
        let start = Instant::now();
        while own.len() < FEWEST || start.elapsed().as_secs_f64() < seconds {
            let lap = self.sweeps(count)?;
            let before = Instant::now();
            let work = self.baseline.run(plain_count);
            plain.push(Lap { time: before.elapsed(), work });
            let without = lap.time.mul_f64(observed_count as f64 / count as f64);
            observing.push(self.observed(observed_count, without)?);
            own.push(lap);
            // Where a single sweep takes longer than a round, fewer rounds must do.
            if start.elapsed().as_secs_f64() > 3.0 * seconds && own.len() >= 3 {
                break;
            }
        }
        self.summary(settings, &own, &plain, observing)
    }

    fn summary(
        &mut self,
        settings: &Settings,
        own: &[Lap],
        plain: &[Lap],
        observing: Vec<f64>,
    ) -> Result<Measured, HostError> {
        const NOTHING: Spread = Spread { low: 0.0, median: 0.0, high: 0.0 };
        let rates = |laps: &[Lap]| Spread::of(laps.iter().map(|lap| lap.rate())).unwrap_or(NOTHING);
        let kind = self.baseline.kind();
        let counted = match (kind, self.flips) {
            (Plain::Wolff, Some(_)) => Counted::Flips,
            (Plain::Metropolis, _) => Counted::Updates,
            _ => Counted::Sites,
        };
        let same = (kind == Plain::Wolff) == (counted == Counted::Flips);
        let ratio = Spread::of(own.iter().zip(plain).map(|(own, plain)| own.rate() / plain.rate()));
        let spins = self.sites as f64 * self.sampler.lanes() as f64;
        let round_seconds = Spread::of(own.iter().map(|lap| lap.time.as_secs_f64())).unwrap_or(NOTHING).median;
        let columns = self.observers.iter().flat_map(|observer| observer.columns().iter());
        Ok(Measured {
            sites: self.sites,
            chains: self.sampler.lanes(),
            temperature: self.temperature,
            counted,
            per_nanosecond: rates(own),
            plain: kind,
            plain_side: self.baseline.square().side(),
            plain_temperature: self.plain_temperature,
            plain_per_nanosecond: rates(plain),
            ratio: ratio.filter(|_| same),
            observing: Spread::of(observing).unwrap_or(NOTHING),
            observed: columns.map(|column| column.name.clone()).collect(),
            state_bytes: self.sampler.save()?.len() as f64 / spins,
            path: self.sampler.path()?,
            threads: settings.threads,
            rounds: own.len(),
            round_seconds,
        })
    }
}

/// Runs something for a while, and so finds how often to do it for a round, at least `fewest` times.
fn warm<E>(seconds: f64, round: f64, fewest: u64, mut run: impl FnMut(u64) -> Result<Duration, E>) -> Result<u64, E> {
    const MOST: u64 = 1 << 40;
    let start = Instant::now();
    let mut count = fewest;
    loop {
        let took = run(count)?.as_secs_f64().max(1e-9);
        if took < round / 4.0 && count < MOST {
            count *= 2;
            continue;
        }
        count = ((count as f64 * round / took).round() as u64).clamp(fewest, MOST);
        if start.elapsed().as_secs_f64() >= seconds {
            return Ok(count);
        }
    }
}

#[cfg(test)]
mod tests {
    use super::*;

    /// What takes a fixed time for each call is called as often as fits, and no less often than asked for.
    #[test]
    fn rounds_are_as_long_as_they_are_to_be() {
        let count = |each: f64, fewest| {
            let run = |count: u64| Ok::<_, ()>(Duration::from_secs_f64(each * count as f64));
            warm(0.0, 0.05, fewest, run).expect("cannot fail")
        };
        assert_eq!((count(1e-3, 1), count(1e-6, 1), count(0.2, 1), count(0.02, 8)), (50, 50_000, 1, 8));
    }
}
