//! Closed forms against extended precision, limits and each other.

#[allow(dead_code, reason = "shared by the tests of several crates")]
#[path = "../../../tests/reference/table.rs"]
mod table;

use spinledger_exact::closed::{critical, ring, square, torus};
use table::{Table, number};

/// Asserts equality to `tolerance` times max(1, |expected|).
#[track_caller]
fn close(found: f64, expected: f64, tolerance: f64, what: &str) {
    assert!((found - expected).abs() <= tolerance * expected.abs().max(1.0), "{what}: {found} is not {expected}");
}

#[test]
fn infinite_square_lattice() {
    let table = Table::parse(include_str!("../../../tests/reference/onsager.csv"));
    let mut rows = 0;
    for row in table.rows() {
        let t = row.number("T");
        let found = square(1.0 / t);
        let check = |column: &str, value: f64| close(value, row.number(column), 1e-12, &format!("{column} at {t}"));
        check("log_z_per_site", found.log_z);
        check("free_energy", found.free_energy);
        check("energy", found.energy);
        check("entropy", found.entropy);
        check("nn_correlation", found.neighbour_correlation);
        check("interface_tension_10", found.tension);
        check("interface_tension_11_per_length", found.tension_diagonal);
        check("inverse_correlation_length_10", found.inverse_correlation_length);
        rows += 1;
        if (t - critical::square_ising()).abs() < 1e-9 {
            // 1/T is not the critical K to better than rounding, where both are singular: about (1e-16)^(1/8) and
            // 0.495 |ln 1e-16|.
            assert!(found.magnetisation < 0.02 && found.heat_capacity > 15.0, "{found:?}");
        } else {
            check("magnetisation", found.magnetisation);
            check("specific_heat", found.heat_capacity);
        }
    }
    assert!(rows > 30, "{rows}");
    for bad in [0.0, -1.0, f64::NAN, f64::INFINITY, 1e3] {
        let found = square(bad);
        assert!([found.log_z, found.energy, found.magnetisation, found.tension].iter().all(|value| value.is_nan()));
    }
}

#[test]
fn heat_capacity_is_the_derivative_of_the_energy() {
    for t in [1.2, 2.1, 2.2, 2.3, 2.5, 4.0] {
        let energy = |t: f64| square(1.0 / t).energy;
        let step = 1e-4;
        // Richardson's combination of two central differences: error of order step^4.
        let wide = (energy(t + step) - energy(t - step)) / (2.0 * step);
        let narrow = (energy(t + 0.5 * step) - energy(t - 0.5 * step)) / step;
        close(square(1.0 / t).heat_capacity, (4.0 * narrow - wide) / 3.0, 1e-8, &format!("T = {t}"));
    }
}

#[test]
fn finite_torus() {
    let table = Table::parse(include_str!("../../../tests/reference/kaufman_finite.csv"));
    let mut rows = 0;
    for row in table.rows() {
        let size = |column| row.text(column).parse::<usize>().expect("a size");
        let (nx, ny, t) = (size("nx"), size("ny"), row.number("T"));
        for (columns, height) in [(nx, ny), (ny, nx)] {
            let found = torus(columns, height, 1.0 / t);
            let what = format!("{columns} x {height} at {t}");
            close(found.log_z, row.number("log_z"), 1e-12, &what);
            close(found.energy, row.number("energy"), 1e-12, &what);
            // A second derivative of the sum of many terms: at most a few digits more are lost.
            close(found.heat_capacity, row.number("specific_heat"), 1e-11, &what);
        }
        rows += 1;
    }
    assert!(rows > 30, "{rows}");
    assert!(torus(4, 4, -0.1).log_z.is_nan());
}

#[test]
fn torus_through_its_critical_point_and_to_large_sizes() {
    // At the critical K itself the term that vanishes and its derivative: differences across it must be smooth.
    let k = 1.0 / critical::square_ising();
    let at = torus(8, 8, k);
    for side in [-1e-7, 1e-7] {
        let near = torus(8, 8, k + side);
        // d(energy)/dK = -heat capacity/K^2 per site.
        close(near.energy, at.energy - side * at.heat_capacity / (k * k), 1e-11, "energy beside the critical point");
    }
    for t in [1.5, 3.0] {
        let (finite, infinite) = (torus(200, 200, 1.0 / t), square(1.0 / t));
        close(finite.energy, infinite.energy, 1e-11, "energy of a large torus");
        close(finite.heat_capacity, infinite.heat_capacity, 1e-9, "heat capacity of a large torus");
    }
    // One column: a ring of ny sites, each with another bond to itself, which adds ny K.
    let (k, n) = (0.37, 7);
    let single = ring(n, k, 0.0);
    close(torus(1, n, k).log_z, single.log_z + n as f64 * k, 1e-12, "one column");
    close(torus(1, n, k).heat_capacity, single.heat_capacity.expect("no field"), 1e-11, "one column");
}

#[test]
fn ring_in_a_field() {
    let table = Table::parse(include_str!("../../../tests/reference/chain_1d.csv"));
    let mut rows = 0;
    for row in table.rows().filter(|row| row.text("boundary") == "ring") {
        let n: usize = row.text("N").parse().expect("a size");
        let found = ring(n, row.number("K"), row.number("h_over_T"));
        let what = format!("{n} {} {}", row.text("K"), row.text("h_over_T"));
        close(found.log_z, row.number("log_z"), 1e-12, &what);
        close(found.magnetisation, row.number("m"), 1e-12, &what);
        rows += 1;
    }
    assert!(rows > 20, "{rows}");
}

#[test]
fn critical_temperatures() {
    let table = Table::parse(include_str!("../../../tests/reference/critical_points.csv"));
    let mut found = 0;
    for row in table.rows() {
        let (model, lattice, quantity) = (row.text("model"), row.text("lattice"), row.text("quantity"));
        if !matches!(quantity, "Tc" | "T_transition_first_order") || row.text("uncertainty") != "exact" {
            continue;
        }
        let value = if let Some(q) = model.strip_prefix("potts").and_then(|q| q.parse::<f64>().ok()) {
            match lattice {
                "square" => critical::square_potts(q),
                "triangular" => critical::triangular_potts(q),
                "honeycomb" => critical::honeycomb_potts(q),
                _ => continue,
            }
        } else if let ("ising", Some(ratio)) = (model, lattice.strip_prefix("square_anisotropic_Jy/Jx=")) {
            critical::anisotropic_square_ising(1.0, number(ratio))
        } else {
            match (model, lattice) {
                ("ising", "square") => Some(critical::square_ising()),
                ("ising", "triangular") => Some(critical::triangular_ising()),
                ("ising", "honeycomb") => Some(critical::honeycomb_ising()),
                ("ising", "kagome") => Some(critical::kagome_ising()),
                _ => continue,
            }
        };
        close(value.expect("a root"), row.number("value"), 1e-14, &format!("{model} {lattice}"));
        found += 1;
    }
    assert!(found >= 25, "{found}");
    for q in [0.0, f64::NAN, f64::INFINITY] {
        assert_eq!(
            (critical::square_potts(q), critical::triangular_potts(q), critical::honeycomb_potts(q)),
            (None, None, None)
        );
    }
    assert_eq!(critical::anisotropic_square_ising(1.0, 0.0), None);
    assert_eq!(critical::anisotropic_square_ising(f64::NAN, 1.0), None);
    let weak = critical::anisotropic_square_ising(-1.0, 1e-8).expect("a root");
    let product = (2.0 / weak).sinh() * (2e-8 / weak).sinh();
    close(product, 1.0, 1e-12, "sinh product of a weak coupling");
}
