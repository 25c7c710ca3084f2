//! Families of quantities: all that come from one observed column.

use crate::steps::settled::Chains;
use spinledger_numerics::sum::CompensatedSum;
use spinledger_stats::autocorrelation::{AutocorrelationParams, Autocovariance, Windowed};
use spinledger_terms::ColumnSpec;

/// What formulas need beside means.
pub(crate) struct Facts {
    /// Free sites N.
    pub(crate) sites: f64,
    /// 1/T in 1/energy.
    pub(crate) inverse: f64,
    /// Sweeps between rows.
    pub(crate) every: f64,
}

/// The quantities that come from a column.
pub(crate) struct Family {
    /// The observed column.
    pub(crate) column: String,
    /// Makes it invariant under the symmetries of the Hamiltonian, where that is possible: the identity, or |m|.
    pub(crate) invariant: Option<fn(f64) -> f64>,
    /// Name of the invariant series in the table of autocorrelations.
    pub(crate) correlation: String,
    /// Whether it decides if the point has equilibrated: e and |m| do.
    pub(crate) decides: bool,
    /// Whether the symmetry reverses its sign.
    pub(crate) signed_by_symmetry: bool,
    /// Its quantities.
    pub(crate) members: Vec<Member>,
}

/// One quantity: a function of means of powers of the column.
#[derive(Clone, Debug)]
pub(crate) struct Member {
    /// Its name.
    pub(crate) name: String,
    /// Whether it depends on the sign that the symmetry reverses: then it is taken from the column as observed, otherwise from the invariant one.
    pub(crate) signed: bool,
    /// Order in tables.
    pub(crate) rank: usize,
    /// Its unit as a word: `energy`, `1/energy` or nothing.
    pub(crate) unit: &'static str,
    /// Powers of the column whose means enter.
    pub(crate) powers: &'static [u32],
    /// Value and derivatives with respect to the means.
    pub(crate) function: fn(&[f64], &Facts) -> (f64, [f64; 2]),
}

/// What is known of a quantity.
#[derive(Clone, Debug)]
pub(crate) enum Quantity {
    /// An estimate.
    Found(Estimate),
    /// A measurement or the function is not finite.
    NotFinite,
    /// Fewer than two measurements.
    TooShort,
}

/// An estimate.
#[derive(Clone, Debug)]
pub(crate) struct Estimate {
    pub(crate) value: f64,
    pub(crate) error: f64,
    /// Integrated autocorrelation time in sweeps.
    pub(crate) tau: f64,
    /// Number of independent measurements; None for a series without fluctuations.
    pub(crate) effective: Option<f64>,
    /// Whether the window of the autocorrelation closed.
    pub(crate) closed: bool,
}

fn mean(m: &[f64], _: &Facts) -> (f64, [f64; 2]) {
    (m[0], [1.0, 0.0])
}

/// N (<e^2> - <e>^2)/T^2.
fn heat_capacity(m: &[f64], f: &Facts) -> (f64, [f64; 2]) {
    let scale = f.sites * f.inverse * f.inverse;
    (scale * (m[1] - m[0] * m[0]), [-2.0 * scale * m[0], scale])
}

/// N (<m^2> - <m>^2)/T, of |m| or of m.
fn susceptibility(m: &[f64], f: &Facts) -> (f64, [f64; 2]) {
    let scale = f.sites * f.inverse;
    (scale * (m[1] - m[0] * m[0]), [-2.0 * scale * m[0], scale])
}

/// N <m^2>/T.
fn susceptibility_disordered(m: &[f64], f: &Facts) -> (f64, [f64; 2]) {
    let scale = f.sites * f.inverse;
    (scale * m[0], [scale, 0.0])
}

/// 1 - <m^4>/(3 <m^2>^2) (Binder 1981 Z. Phys. B 43 119).
fn binder(m: &[f64], _: &Facts) -> (f64, [f64; 2]) {
    let (second, fourth) = (m[0], m[1]);
    let value = 1.0 - fourth / (3.0 * second * second);
    (value, [2.0 * fourth / (3.0 * second * second * second), -1.0 / (3.0 * second * second)])
}

type Function = fn(&[f64], &Facts) -> (f64, [f64; 2]);

fn member(name: &str, rank: usize, unit: &'static str, powers: &'static [u32], function: Function) -> Member {
    Member { name: name.into(), signed: false, rank, unit, powers, function }
}

/// The families of the observed columns.
pub(crate) fn families(observed: &[ColumnSpec]) -> Vec<Family> {
    let mut families = Vec::new();
    for (number, column) in observed.iter().enumerate() {
        let unit = if column.unit == "energy" { "energy" } else { "" };
        let own = Member { signed: !column.invariant, ..member(&column.name, 100 + number, unit, &[1], mean) };
        let mut family = Family {
            column: column.name.clone(),
            invariant: if column.invariant { Some(|x| x) } else { None },
            correlation: column.name.clone(),
            decides: false,
            signed_by_symmetry: false,
            members: Vec::new(),
        };
        match column.name.as_str() {
            "energy" => {
                family.decides = true;
                family.members.push(Member { rank: 0, ..own });
                family.members.push(member("heat_capacity", 1, "", &[1, 2], heat_capacity));
            }
            "magnetisation" => {
                family.decides = true;
                family.invariant = Some(f64::abs);
                family.correlation = "magnetisation_abs".into();
                if !column.invariant {
                    family.signed_by_symmetry = true;
                    let connected = member("susceptibility_connected", 6, "1/energy", &[1, 2], susceptibility);
                    family.members.push(Member { rank: 2, ..own });
                    family.members.push(Member { signed: true, ..connected });
                }
                family.members.extend(of_length());
            }
            // The squared length of the order parameter of Potts colours, from which its length follows.
            "order_squared" => {
                family.decides = true;
                family.invariant = Some(f64::sqrt);
                family.correlation = "magnetisation_abs".into();
                family.members.extend(of_length());
                family.members.push(Member { powers: &[2], ..own });
            }
            _ => family.members.push(own),
        }
        families.push(family);
    }
    families
}

/// What is derived from the length of the order parameter.
fn of_length() -> Vec<Member> {
    vec![
        member("magnetisation_abs", 3, "", &[1], mean),
        member("magnetisation_squared", 4, "", &[2], mean),
        member("susceptibility", 5, "1/energy", &[1, 2], susceptibility),
        member("susceptibility_disordered", 7, "1/energy", &[2], susceptibility_disordered),
        member("binder", 8, "", &[2, 4], binder),
    ]
}

/// x^n by multiplication, the same bits everywhere.
pub(crate) fn power(x: f64, n: u32) -> f64 {
    let square = x * x;
    match n {
        1 => x,
        2 => square,
        4 => square * square,
        _ => (0..n).fold(1.0, |product, _| product * x),
    }
}

/// Rows projected at a time.
const CHUNK: usize = 4096;

/// Estimates a quantity: its value at the means, its error from the autocorrelation of the series projected on its gradient (Wolff 2004
/// Comput. Phys. Commun. 156 143). The projected series is made in pieces, so that memory does not grow.
pub(crate) fn estimate(chains: &Chains, member: &Member, facts: &Facts) -> Quantity {
    let count: usize = chains.values.iter().map(Vec::len).sum();
    if count < 2 {
        return Quantity::TooShort;
    }
    let means: Vec<f64> = member
        .powers
        .iter()
        .map(|n| {
            let mut sum = CompensatedSum::new();
            chains.values.iter().flatten().for_each(|x| sum.add(power(*x, *n)));
            sum.value() / count as f64
        })
        .collect();
    let (value, gradient) = (member.function)(&means, facts);
    if !value.is_finite() || gradient.iter().take(means.len()).any(|g| !g.is_finite()) {
        return Quantity::NotFinite;
    }
    let project = |x: f64| {
        let mut projected = 0.0;
        for ((n, mean), slope) in member.powers.iter().zip(&means).zip(&gradient) {
            projected += slope * (power(x, *n) - mean);
        }
        projected
    };
    let params = AutocorrelationParams::default();
    let mut lags = 64;
    loop {
        let mut sums = Autocovariance::new(0.0, lags);
        let mut piece = Vec::with_capacity(CHUNK);
        for chain in &chains.values {
            for rows in chain.chunks(CHUNK) {
                piece.clear();
                piece.extend(rows.iter().map(|x| project(*x)));
                sums.push(&piece);
            }
            sums.end_chain();
        }
        match sums.finish().window(&params) {
            Windowed::NeedsLags(more) => lags = more,
            Windowed::Done(found) => {
                if !found.error.is_finite() {
                    return Quantity::NotFinite;
                }
                // At infinite temperature a response is zero whatever fluctuates, and nothing is left to estimate.
                let fluctuates = found.variance > 0.0;
                return Quantity::Found(Estimate {
                    value,
                    error: found.error,
                    tau: facts.every * found.tau,
                    effective: fluctuates.then_some(count as f64 / (2.0 * found.tau)),
                    closed: found.closed,
                });
            }
        }
    }
}
