//! Bits of results that must not move without a note: entries computed by earlier releases hold them.

mod common;

use common::Normal;
use spinledger_stats::autocorrelation::{AutocorrelationParams, autocorrelation};
use spinledger_stats::crossing::{CrossingParams, Curve, Replicates, crossing};
use spinledger_stats::jackknife::Blocks;
use spinledger_stats::rhat::rhat;

#[test]
fn value_stability() {
    let mut normal = Normal::new("stability", 0);
    // The second chain needs lags beyond the direct sums.
    let (short, long) = (normal.autoregressive(0.5, 3000), normal.autoregressive(0.99, 30_000));
    let params = AutocorrelationParams::default();
    let mut found = Vec::new();
    for chain in [&short, &long] {
        let estimate = autocorrelation(&[chain], &params).expect("a sound chain");
        found.extend([estimate.mean, estimate.tau, estimate.error, estimate.rho_error(5)]);
    }
    let mut blocks = Blocks::new(1);
    blocks.push_chain(&[&short], 20);
    let jackknife = blocks.jackknife(1, |means, out| out[0] = means[0] * means[0]).expect("sound blocks");
    found.extend([jackknife.corrected[0], jackknife.error(0)]);
    found.push(rhat(&[&short, &long]).expect("not constant"));
    let mut curve = |size: f64| {
        let x: Vec<f64> = (0..8).map(|step| 2.24 + 0.01 * f64::from(step)).collect();
        let y: Vec<f64> =
            x.iter().map(|x| 0.6 - 0.4 * size * (x - 2.27) + 0.05 / size + 1e-3 * normal.next()).collect();
        let replicates = y.iter().map(|y| (0..8).map(|_| y + 1e-4 * normal.next()).collect()).collect();
        Curve { size, x, y, replicates: Replicates::Separate(replicates) }
    };
    let curves = [12.0, 16.0, 24.0, 32.0].map(&mut curve);
    let info = crossing(&curves, &CrossingParams::default()).expect("sound curves");
    let (place, value) = (info.place.expect("a crossing"), info.value.expect("a crossing"));
    found.extend([place.value, place.error, place.chi_squared, value.value, info.inverse_nu.0]);
    let found: Vec<u64> = found.into_iter().map(f64::to_bits).collect();
    assert_eq!(found, FROZEN, "{found:#x?}");
}

const FROZEN: [u64; 16] = [
    0x3f53_033d_85ad_5100,
    0x3ff7_9f25_c7ef_fd93,
    0x3fa0_28ed_0b09_75ac,
    0x3f97_b409_a5a8_f319,
    0xbfb7_306d_fe08_1f68,
    0x4055_7d43_681d_3313,
    0x3fb2_f5dc_bdec_56ef,
    0x3f70_f185_5af0_167f,
    0xbf4a_a800_8185_6bd6,
    0x3f2d_ee65_806b_d579,
    0x3ff0_0d5c_c0a3_cfb8,
    0x4002_2846_d525_2945,
    0x3f23_b47c_9247_6306,
    0x4000_caec_5a84_0734,
    0x3fe3_5b02_cde7_03db,
    0x3fef_77f5_5ec4_a82c,
];
