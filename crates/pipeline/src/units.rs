//! The units of a pipeline.

use spinledger_terms::{Admission, Field, Kind, Path, Problem, Value, admit};

/// Units of energies and temperatures.
#[derive(Clone, Copy, Debug, PartialEq, Eq, Default)]
pub enum Scale {
    /// k_B = 1, and whatever energy unit the reader has in mind.
    #[default]
    Reduced,
    /// Energies in meV, temperatures in kelvin.
    MilliElectronVolt,
    /// Energies as temperatures, E/k_B in kelvin; temperatures in kelvin.
    Kelvin,
}

/// The units of a pipeline.
#[derive(Clone, Copy, Debug, PartialEq, Default)]
pub struct Units {
    /// Of energies and temperatures.
    pub energy: Scale,
    /// The moment of a spin of length one, in Bohr magnetons; fields are then in tesla.
    pub moment: Option<f64>,
}

impl Units {
    /// Boltzmann's constant in units of energy per unit of temperature. In meV/K: 1000 k_B/e with the exact constants of the SI
    /// of 2019, 1.380649e-23 J/K and 1.602176634e-19 C.
    pub fn boltzmann(&self) -> f64 {
        match self.energy {
            Scale::Reduced | Scale::Kelvin => 1.0,
            Scale::MilliElectronVolt => 0.086_173_332_621_451_77,
        }
    }

    /// The word of the pipeline.
    pub fn word(&self) -> &'static str {
        match self.energy {
            Scale::Reduced => "reduced",
            Scale::MilliElectronVolt => "meV",
            Scale::Kelvin => "K",
        }
    }

    /// The unit of energies, for column metadata; empty in reduced units.
    pub fn energy_unit(&self) -> &'static str {
        match self.energy {
            Scale::Reduced => "",
            Scale::MilliElectronVolt => "meV",
            Scale::Kelvin => "K",
        }
    }

    /// The unit of temperatures, for column metadata; empty in reduced units.
    pub fn temperature_unit(&self) -> &'static str {
        match self.energy {
            Scale::Reduced => "",
            Scale::MilliElectronVolt | Scale::Kelvin => "K",
        }
    }

    /// The unit of fields, for column metadata: tesla where a moment is given, else that of energies.
    pub fn field_unit(&self) -> &'static str {
        if self.moment.is_some() { "T" } else { self.energy_unit() }
    }

    /// Energy per unit of field: the moment in meV/T or K/T, or 1 where fields are energies. Bohr magneton of CODATA 2018,
    /// 9.2740100783e-24 J/T.
    pub fn field_energy(&self) -> f64 {
        const MAGNETON: f64 = 9.274_010_078_3e-24;
        match (self.moment, self.energy) {
            (None, _) | (_, Scale::Reduced) => 1.0,
            (Some(moment), Scale::MilliElectronVolt) => moment * (MAGNETON / 1.602_176_634e-22),
            (Some(moment), Scale::Kelvin) => moment * (MAGNETON / 1.380_649e-23),
        }
    }

    /// What `units` may be.
    pub(crate) fn kind() -> Kind {
        let energy = Kind::words(&["reduced", "meV", "K"]);
        let fields = vec![
            Field::new("energy", energy.clone(), "unit of energies").required(),
            Field::new("moment", Kind::POSITIVE, "moment of a spin, in Bohr magnetons"),
        ];
        Kind::Either { of: vec![energy, Kind::Tree { fields }] }
    }

    /// Units from what stands after `units`.
    pub(crate) fn read(raw: &Value, path: &Path, admission: &mut Admission<'_>) -> Units {
        let Some(value) = admit(&Self::kind(), raw, path, admission) else { return Units::default() };
        let word = value.get("energy").unwrap_or(&value).as_str();
        let energy = match word {
            Some("meV") => Scale::MilliElectronVolt,
            Some("K") => Scale::Kelvin,
            _ => Scale::Reduced,
        };
        let moment = value.get("moment").and_then(Value::as_f64);
        if moment.is_some() && energy == Scale::Reduced {
            let message = "a moment turns tesla into energy, which reduced units do not have";
            let problem =
                Problem::at_key(&path.key("moment"), message).expected("`energy: meV` or `energy: K` with it");
            admission.problems.push(problem);
        }
        Units { energy, moment }
    }
}

#[cfg(test)]
mod tests {
    use super::*;

    /// Constants that results hang on.
    #[test]
    fn value_stability() {
        let units = |energy, moment| Units { energy, moment };
        let mev = units(Scale::MilliElectronVolt, None);
        assert_eq!(mev.boltzmann(), 1.380649e-23 / 1.602176634e-22);
        assert_eq!(mev.boltzmann(), "0.086173332621451774337".parse::<f64>().unwrap());
        assert_eq!((mev.field_energy(), mev.field_unit()), (1.0, "meV"));
        let tesla = units(Scale::MilliElectronVolt, Some(2.0));
        assert!((tesla.field_energy() - 2.0 * 5.7883818060e-2).abs() < 1e-10);
        assert!((units(Scale::Kelvin, Some(1.0)).field_energy() - 0.67171381563).abs() < 1e-9);
        // The reference table: 2/ln(1 + sqrt 2) for a coupling of 1 meV is 26.332802099940331654 K.
        let t = 2.269_185_314_213_022 / mev.boltzmann();
        assert!((t - 26.332_802_099_940_33).abs() < 1e-13, "{t}");
    }
}
