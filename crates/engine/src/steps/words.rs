//! What columns and quantities are called on axes, and in which unit they are.

use crate::job::UnitNames;

/// A column or quantity as it stands on an axis.
pub(super) fn label(name: &str) -> String {
    let words = match name {
        "energy" => "energy per site",
        "heat_capacity" => "heat capacity per site",
        "magnetisation" => "magnetisation per site",
        "magnetisation_abs" => "order parameter |m|",
        "magnetisation_squared" => "squared order parameter m²",
        "susceptibility" => "susceptibility per site",
        "susceptibility_connected" => "connected susceptibility per site",
        "susceptibility_disordered" => "susceptibility N⟨m²⟩/T",
        "binder" => "Binder cumulant",
        "critical_temperature" => "ordering temperature",
        "crossing_value" => "value at the crossing",
        "size" => "size L",
        _ => return name.replace('_', " "),
    };
    words.to_owned()
}

/// The same at the beginning of a line.
pub(super) fn title(name: &str) -> String {
    let label = label(name);
    let mut letters = label.chars();
    letters.next().map_or(String::new(), |first| first.to_uppercase().chain(letters).collect())
}

/// The unit of a quantity whose values stand in a column that has none, since other quantities stand there too.
pub(super) fn unit(quantity: &str, units: &UnitNames) -> String {
    match quantity {
        "energy" => units.energy.clone(),
        "susceptibility" | "susceptibility_connected" | "susceptibility_disordered" => match units.energy.as_str() {
            "" => String::new(),
            energy => format!("1/{energy}"),
        },
        "shift_without_smallest" => units.temperature.clone(),
        _ if quantity.starts_with("critical_temperature") => units.temperature.clone(),
        _ => String::new(),
    }
}
