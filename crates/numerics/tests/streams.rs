//! Keys, the interleaved generator, its saved state, and the maps from words to numbers.

use proptest::prelude::*;
use spinledger_numerics::random::rand_core::{Rng, SeedableRng};
use spinledger_numerics::random::{
    Eight, RestoreError, SAVED_LEN, SplitMix, StreamKey, Threshold32, Threshold64, Xoshiro, below, below_u32,
    open_unit_f64, unit_f64,
};
use spinledger_numerics::special::chi_squared_p;

fn key(text: &str) -> StreamKey {
    StreamKey::from_text(text)
}

#[test]
fn keys_differ_by_text_label_and_lane() {
    let root = key("a");
    let mut keys = vec![root, key("b"), root.derive(""), root.derive("0"), root.derive("start")];
    keys.extend((0..4).map(|lane| root.lane(lane)));
    // A label with the bytes of a lane number is still another stream.
    keys.push(root.derive("\0\0\0\0"));
    let count = keys.len();
    keys.sort();
    keys.dedup();
    assert_eq!(keys.len(), count);
    assert_eq!(root.derive("start"), key("a").derive("start"));
}

#[test]
fn value_stability() {
    let root = key("value stability");
    let text = format!("{root:?} {:?} {:?}", root.derive("label"), root.lane(3));
    let mut one = Xoshiro::from_key(&root);
    let mut eight = Eight::from_key(&root);
    let first: Vec<u64> = (0..3).map(|_| one.next()).collect();
    let words: Vec<u64> = (0..10).map(|_| eight.next()).collect();
    let halves = [eight.next_u32(), eight.next_u32(), eight.next_u32()];
    let small: Vec<u64> = (0..8).map(|_| below(10, || one.next())).collect();
    let found = format!("{text}\n{first:x?}\n{words:x?}\n{halves:x?}\n{small:?}");
    assert_eq!(found, FROZEN, "{found}");
}

const FROZEN: &str = "StreamKey(917b0ebaceddfdc1d21ecaf12a71065c6dedbf06bbe1d96ab26925b438a3a4ab) StreamKey(c38fe4cf6c04a455346ed8ebf59bf33d5af95292a0406d2df17360dfbb4a433a) StreamKey(7ede2c56a675c0286580f2468132f3534f75092e05887ce1d2b49d279dd39854)\n\
[1c2fb1374b4f5cae, 7de6a52630c257d8, 973e022c8e2586df]\n\
[1c2fb1374b4f5cae, 5662bd91674550a3, 80b8e35160e9089d, fc4cd96c07608ea3, e8e19679be1357db, fae1a316ae8c0e87, 51a25627b69c499e, 6921c0daa384c0a6, 7de6a52630c257d8, 29e8b5b8f1bf7d]\n\
[a79d0594, 237d6a99, b0a4a1af]\n\
[4, 3, 0, 8, 5, 6, 3, 2]";

#[test]
fn lanes_are_single_generators() {
    let root = key("lanes");
    let mut words = vec![0; 8 * 100];
    Eight::from_key(&root).fill(&mut words);
    let mut one = Xoshiro::from_key(&root);
    for block in words.chunks(8) {
        assert_eq!(block[0], one.next());
    }
    let mut sorted = words.clone();
    sorted.sort_unstable();
    sorted.dedup();
    assert_eq!(sorted.len(), words.len(), "a repeated word among 800 has probability 2e-14: lanes coincide");
}

#[test]
fn all_zero_state_is_replaced() {
    let mut splitmix = SplitMix::new(0);
    let expected: [u64; 4] = std::array::from_fn(|_| splitmix.next());
    assert_eq!(Xoshiro::from_state([0; 4]).state(), expected);
    assert_eq!(Xoshiro::from_seed([0; 32]).state(), expected);
    assert_eq!(Xoshiro::from_state([0, 0, 0, 1]).state(), [0, 0, 0, 1]);
}

#[test]
fn damaged_states_are_refused() {
    let mut bytes = Vec::new();
    Eight::from_key(&key("damage")).save(&mut bytes);
    assert_eq!(bytes.len(), SAVED_LEN);
    assert_eq!(Eight::restore(&bytes[1..]), Err(RestoreError::Length { found: SAVED_LEN - 1, needed: SAVED_LEN }));
    assert_eq!(Eight::restore(&[]), Err(RestoreError::Length { found: 0, needed: SAVED_LEN }));
    let at = |index: usize, value: u8| {
        let mut damaged = bytes.clone();
        damaged[index] = value;
        Eight::restore(&damaged)
    };
    assert_eq!(at(320, 9), Err(RestoreError::Content), "more words drawn than a block has");
    assert_eq!(at(321, 2), Err(RestoreError::Content), "neither a half nor none");
    assert_eq!(at(322, 1), Err(RestoreError::Content), "a half that does not wait");
    assert_eq!(at(256, 1), Err(RestoreError::Content), "a word that was drawn");
    let mut stuck = bytes.clone();
    stuck[64..96].fill(0);
    assert_eq!(Eight::restore(&stuck), Err(RestoreError::Content), "a lane of zeros");
}

#[test]
fn traits_of_rand_read_the_same_stream() {
    let root = key("traits");
    let (mut plain, mut through) = (Eight::from_key(&root), Eight::from_key(&root));
    assert_eq!(plain.next(), Rng::next_u64(&mut through));
    assert_eq!(plain.next_u32(), Rng::next_u32(&mut through));
    let mut bytes = [0; 11];
    through.fill_bytes(&mut bytes);
    assert_eq!(bytes[..8], plain.next().to_le_bytes());
    assert_eq!(bytes[8..], plain.next().to_le_bytes()[..3]);
    let mut one = Xoshiro::from_key(&root);
    let word = one.clone().next();
    assert_eq!(u64::from(Rng::next_u32(&mut one)), word >> 32);
}

#[test]
fn interval_maps_at_their_ends() {
    assert_eq!(unit_f64(0), 0.0);
    assert_eq!(unit_f64(u64::MAX), 1.0 - f64::EPSILON / 2.0);
    assert_eq!(open_unit_f64(0), f64::EPSILON / 2.0);
    assert_eq!(open_unit_f64(u64::MAX), 1.0 - f64::EPSILON / 2.0);
    assert_eq!(open_unit_f64(1 << 63), 0.5 + f64::EPSILON / 2.0);
}

#[test]
fn below_rejects_exactly_the_surplus() {
    // 2^64 = 1 mod 3: one word of all is too many, the one whose product has low half 0.
    let mut words = [0, 1u64].into_iter();
    assert_eq!(below(3, || words.next().expect("at most one rejection")), 0);
    assert_eq!(words.next(), None);
    // Nothing is rejected for a power of two.
    assert_eq!(below(8, || 0), 0);
    assert_eq!(below(8, || u64::MAX), 7);
    assert_eq!(below(1, || u64::MAX), 0);
    assert_eq!(below_u32(u32::MAX, || u32::MAX), u32::MAX - 1);
    // Each sixth of the half words belongs to its own value.
    let mut counts = [0; 6];
    for step in 0..6u32 {
        counts[below_u32(6, || 1 + step * 715_827_883) as usize] += 1;
    }
    assert_eq!(counts, [1; 6]);
}

#[test]
fn below_is_uniform() {
    // Chi-squared with 6 degrees; fixed seed, false-alarm rate 1e-6.
    let mut stream = Eight::from_key(&key("uniform"));
    let mut counts = [0u32; 7];
    for _ in 0..70_000 {
        counts[below(7, || stream.next()) as usize] += 1;
    }
    let chi_squared = counts.iter().map(|count| (f64::from(*count) - 1e4).powi(2) / 1e4).sum();
    assert!(chi_squared_p(chi_squared, 6) > 1e-6, "{counts:?}");
}

#[test]
fn thresholds_at_their_ends() {
    for p in [0.0, -0.0, -1.0, f64::NAN, f64::NEG_INFINITY, 1e-30] {
        assert!(!Threshold64::new(p).accepts(0), "{p}");
        assert!(!Threshold32::new(p).accepts(0), "{p}");
    }
    for p in [1.0, 2.0, f64::INFINITY] {
        assert!(Threshold64::new(p).accepts(u64::MAX), "{p}");
        assert!(Threshold32::new(p).accepts(u32::MAX), "{p}");
    }
    let half = Threshold64::new(0.5);
    assert!(half.accepts((1 << 63) - 1) && !half.accepts(1 << 63));
    let half = Threshold32::new(0.5);
    assert!(half.accepts((1 << 31) - 1) && !half.accepts(1 << 31));
    assert_eq!(Threshold64::new(1.0 - f64::EPSILON / 2.0).limit(), (u64::MAX - 2047, false));
    assert_eq!(Threshold32::new(1.0 - f64::EPSILON).limit(), 1 << 32);
}

proptest! {
    // Failing inputs are printed; a file of them would be written beside the sources.
    #![proptest_config(ProptestConfig { failure_persistence: None, ..ProptestConfig::default() })]

    #[test]
    fn any_way_of_drawing_reads_one_stream(draws in proptest::collection::vec((0..5u8, 0..30usize), 0..20)) {
        let root = key("mixed");
        let mut reference = Eight::from_key(&root);
        let mut mixed = reference.clone();
        let mut half = None;
        for (way, count) in draws {
            match way {
                0 => prop_assert_eq!(mixed.next(), reference.next()),
                1 => {
                    let expected: [u64; 8] = std::array::from_fn(|_| reference.next());
                    prop_assert_eq!(mixed.next_block(), expected);
                }
                2 => {
                    let mut words = vec![0; count];
                    mixed.fill(&mut words);
                    let expected: Vec<u64> = (0..count).map(|_| reference.next()).collect();
                    prop_assert_eq!(words, expected);
                }
                3 => {
                    let expected = half.take().unwrap_or_else(|| {
                        let word = reference.next();
                        half = Some((word >> 32) as u32);
                        word as u32
                    });
                    prop_assert_eq!(mixed.next_u32(), expected);
                }
                _ => {
                    let mut bytes = Vec::new();
                    mixed.save(&mut bytes);
                    let restored = Eight::restore(&bytes).expect("just saved");
                    prop_assert_eq!(&restored, &mixed);
                    let mut again = Vec::new();
                    restored.save(&mut again);
                    prop_assert_eq!(&again, &bytes);
                    mixed = restored;
                }
            }
        }
    }

    #[test]
    fn threshold_error_is_as_stated(p in 0.0..1.0f64) {
        let small = Threshold32::new(p).limit() as f64 / 4_294_967_296.0;
        prop_assert!((small - p).abs() <= 2f64.powi(-33));
        let (limit, always) = Threshold64::new(p).limit();
        prop_assert!(!always);
        prop_assert!((limit as f64 / 18_446_744_073_709_551_616.0 - p).abs() <= 2f64.powi(-64));
    }

    #[test]
    fn below_stays_below(n in 1..=u64::MAX, seed: u64) {
        let mut splitmix = SplitMix::new(seed);
        prop_assert!(below(n, || splitmix.next()) < n);
    }
}
