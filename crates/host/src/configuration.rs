//! Configurations as the host keeps them, and start configurations.

use crate::error::{HostError, Result};
use crate::{Energy, Graph};
use spinledger_abi::{SL_VIEW_BYTES, SL_VIEW_VECTORS, SlView};
use spinledger_flatten::Spins;
use spinledger_numerics::random::{StreamKey, Xoshiro, below, unit_f64};

/// All spins of a chain, free sites first, then pinned ones.
#[derive(Clone, Debug, PartialEq)]
pub enum Configuration {
    /// One state a site.
    States(Vec<u8>),
    /// One vector a site, components innermost.
    Vectors(Vec<f64>),
}

impl Configuration {
    pub(crate) fn spins(&self) -> Spins<'_> {
        match self {
            Configuration::States(states) => Spins::States(states),
            Configuration::Vectors(vectors) => Spins::Vectors(vectors),
        }
    }

    /// The configuration as a view; valid while `self` is not changed.
    pub(crate) fn view(&self, energy: &Energy) -> SlView {
        let (kind, components, data, length) = match self {
            Configuration::States(s) => (SL_VIEW_BYTES, 1, s.as_ptr().cast(), s.len()),
            Configuration::Vectors(v) => (SL_VIEW_VECTORS, energy.components.max(1), v.as_ptr().cast(), v.len()),
        };
        SlView {
            size: size_of::<SlView>(),
            kind,
            components: if kind == SL_VIEW_VECTORS { components as u32 } else { 0 },
            sites: length / components,
            stride: components,
            component_stride: usize::from(kind == SL_VIEW_VECTORS),
            offset: 0,
            positions: std::ptr::null(),
            data,
            length,
        }
    }

    /// Refuses what is of another kind or length, holds states that do not exist or vectors that are not finite, or shows a pinned site otherwise
    /// than it is.
    pub(crate) fn check(&self, graph: &Graph, energy: &Energy) -> Result<()> {
        let misfit = |what: String| Err(HostError::Configuration { what });
        match self {
            Configuration::States(states) => {
                if energy.states == 0 {
                    return misfit("it holds states, and the model's spins are vectors".into());
                }
                if states.len() != graph.total {
                    return misfit(format!("it has {} sites, and the lattice {}", states.len(), graph.total));
                }
                if let Some(site) = states.iter().position(|&s| usize::from(s) >= energy.states) {
                    let (state, q) = (states[site], energy.states);
                    return misfit(format!("site {site} has state {state}, and there are {q}"));
                }
                match states[graph.sites..].iter().zip(&energy.pinned_states).position(|(a, b)| a != b) {
                    Some(k) => misfit(format!("site {} is pinned to another state", graph.sites + k)),
                    None => Ok(()),
                }
            }
            Configuration::Vectors(vectors) => {
                let n = energy.components;
                if n == 0 {
                    return misfit("it holds vectors, and the model's spins are states".into());
                }
                if vectors.len() != graph.total * n {
                    return misfit(format!(
                        "it has {} numbers, and {} sites need {n} each",
                        vectors.len(),
                        graph.total
                    ));
                }
                if let Some(k) = vectors.iter().position(|x| !x.is_finite()) {
                    return misfit(format!("the vector at site {} is not finite", k / n));
                }
                match vectors[graph.sites * n..].iter().zip(&energy.pinned_vectors).position(|(a, b)| a != b) {
                    Some(k) => misfit(format!("site {} is pinned to another vector", graph.sites + k / n)),
                    None => Ok(()),
                }
            }
        }
    }

    /// Free spins followed by the model's pinned ones. Whether the free ones fit is found out where the configuration is imported.
    pub fn with_rim(free: Configuration, energy: &Energy) -> Self {
        match free {
            Configuration::States(mut states) => {
                states.extend_from_slice(&energy.pinned_states);
                Configuration::States(states)
            }
            Configuration::Vectors(mut vectors) => {
                vectors.extend_from_slice(&energy.pinned_vectors);
                Configuration::Vectors(vectors)
            }
        }
    }
}

/// Every free spin drawn independently: states with equal probability, vectors uniformly on the circle or sphere. Sites are drawn in order, so the
/// same key gives the same configuration everywhere.
pub fn random_start(energy: &Energy, graph: &Graph, key: &StreamKey) -> Configuration {
    let mut stream = Xoshiro::from_key(key);
    let free = match energy.components {
        0 => {
            let q = energy.states as u64;
            Configuration::States((0..graph.sites).map(|_| below(q, || stream.next()) as u8).collect())
        }
        n => {
            let mut vectors = Vec::with_capacity(graph.total * n);
            for _ in 0..graph.sites {
                if n == 2 {
                    vectors.extend(direction(&mut stream));
                } else {
                    vectors.extend(point_on_sphere(&mut stream));
                }
            }
            Configuration::Vectors(vectors)
        }
    };
    Configuration::with_rim(free, energy)
}

/// A point in the unit disk, not its centre, and its squared distance.
fn point_in_disk(stream: &mut Xoshiro) -> (f64, f64, f64) {
    loop {
        let (x, y) = (2.0 * unit_f64(stream.next()) - 1.0, 2.0 * unit_f64(stream.next()) - 1.0);
        let square = x * x + y * y;
        // Too close to the centre, the division below would lose digits of the direction.
        if (1e-12..1.0).contains(&square) {
            return (x, y, square);
        }
    }
}

/// Uniform on the circle: the direction of a uniform point in the disk.
fn direction(stream: &mut Xoshiro) -> [f64; 2] {
    let (x, y, square) = point_in_disk(stream);
    let r = square.sqrt();
    [x / r, y / r]
}

/// Uniform on the sphere (Marsaglia 1972 Ann. Math. Stat. 43 645).
fn point_on_sphere(stream: &mut Xoshiro) -> [f64; 3] {
    let (x, y, square) = point_in_disk(stream);
    let r = 2.0 * (1.0 - square).sqrt();
    [x * r, y * r, 1.0 - 2.0 * square]
}

/// Every free spin alike: in the model's state for sites pinned up, or state 0 where it has none; vectors along the model's vector for them.
pub fn ordered_start(energy: &Energy, graph: &Graph) -> Configuration {
    let free = match energy.components {
        0 => Configuration::States(vec![energy.up.unwrap_or(0); graph.sites]),
        _ => Configuration::Vectors(energy.up_vector.repeat(graph.sites)),
    };
    Configuration::with_rim(free, energy)
}
