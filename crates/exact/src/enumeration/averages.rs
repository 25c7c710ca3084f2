//! Canonical averages from degeneracies.

use spinledger_numerics::sum::sum_by;

use super::degeneracies::Degeneracies;

/// Averages at one temperature, per free site. Energies in the unit of the tables, k_B = 1.
#[derive(Clone, Copy, Debug, PartialEq)]
#[non_exhaustive]
pub struct Averages {
    /// ln Z of the whole system.
    pub log_z: f64,
    /// `<E>/N`.
    pub energy: f64,
    /// `(<E^2> - <E>^2)/(N T^2)`.
    pub heat_capacity: f64,
    /// `-T ln Z/N`; `None` at infinite temperature.
    pub free_energy: Option<f64>,
    /// `(ln Z + <E>/T)/N`.
    pub entropy: f64,
    /// Mean order per site by component: `<m>`, or `<order>` for colours.
    pub order: [f64; 3],
    /// `<|m|>`, the mean length of the order parameter.
    pub order_abs: f64,
    /// `<m^2>`.
    pub order_squared: f64,
    /// `<m^4>`.
    pub order_fourth: f64,
    /// `1 - <m^4>/(3 <m^2>^2)`; `None` where the order vanishes in every state.
    pub binder: Option<f64>,
}

impl Averages {
    pub(super) fn of(degeneracies: &Degeneracies, inverse_temperature: f64) -> Self {
        let (weights, log_z) = degeneracies.weights(inverse_temperature);
        let levels = degeneracies.levels();
        let sites = degeneracies.sites() as f64;
        let mean = |value: &dyn Fn(usize) -> f64| sum_by(levels.len(), |index| weights[index] * value(index));
        // Deviations from the lowest energy keep the variance accurate at low temperature.
        let lowest = levels[0].energy;
        let excess = mean(&|index| levels[index].energy - lowest);
        let total = lowest + excess;
        let variance = mean(&|index| {
            let deviation = levels[index].energy - lowest - excess;
            deviation * deviation
        });
        let squared: Vec<f64> = levels.iter().map(|level| degeneracies.order_squared(level)).collect();
        let orders: Vec<[f64; 3]> = levels.iter().map(|level| degeneracies.order(level)).collect();
        let order_squared = mean(&|index| squared[index]);
        let order_fourth = mean(&|index| squared[index] * squared[index]);
        let free_energy = -log_z / inverse_temperature / sites;
        Self {
            log_z,
            energy: total / sites,
            heat_capacity: inverse_temperature * inverse_temperature * variance / sites,
            free_energy: Some(free_energy).filter(|_| inverse_temperature != 0.0),
            entropy: (log_z + inverse_temperature * total) / sites,
            order: std::array::from_fn(|component| mean(&|index| orders[index][component])),
            // Rounding may leave a square just below 0.
            order_abs: mean(&|index| squared[index].max(0.0).sqrt()),
            order_squared,
            order_fourth,
            binder: (order_squared > 0.0).then(|| 1.0 - order_fourth / (3.0 * order_squared * order_squared)),
        }
    }
}
