use super::*;
use crate::dynamics::tests::dynamics;
use spinledger_ledger::{ChainPlace, Line};

fn ask(measure: u64, chains: u32) -> Ask {
    Ask { measure, chains, starts: vec![Start::Ordered, Start::Random], discard: false, keep: None }
}

/// Blocks of a group: lane, block, rows.
fn record(index: &mut Index, group: &Group, blocks: &[(u32, u32, u64)]) {
    for &(lane, number, rows) in blocks {
        let key = Key::of(&group.block_preimage(lane, Block { number, first: 0, rows }));
        let chain = Some(ChainPlace { chain: group.key, block: number, number: lane, rows });
        let content = ContentHash([lane as u8; 32]);
        index.add(Line { key, kind: "block".into(), chain, content, seconds: 1.0, updates: 1, note: String::new() });
    }
}

/// Blocks of 16 rows.
fn point(measure: u64, chains: u32, index: &Index) -> Point {
    let mut dynamics = dynamics();
    dynamics.nominal_sites = 1 << 30;
    plan_point(Vec::new(), dynamics, &ask(measure, chains), None, None, index)
}

/// What keys of blocks and series are made of.
#[test]
fn value_stability() {
    let mut point = point(40, 3, &Index::default());
    assert_eq!(point.block_rows, 16);
    point.groups[0].value = Value::text("GROUP");
    let block = Block { number: 2, first: 32, rows: 8 };
    assert_eq!(
        point.groups[0].block_preimage(1, block),
        r#"{"block":2,"chains":"GROUP","kind":"block","lane":1,"rows":8}"#
    );
    point.groups.truncate(2);
    point.groups[0].key = Key([0x11; 32]);
    point.groups[1].key = Key([0x22; 32]);
    let columns = [("temperature".to_owned(), "K".to_owned(), Value::Number(2.5))];
    let expected = r#"{"chains":[{"asked":2,"key":""#.to_owned()
        + &"11".repeat(32)
        + r#""},{"asked":1,"key":""#
        + &"22".repeat(32)
        + r#""}],"columns":[["temperature","K",2.5]],"kind":"series","measure":40,"revision":1}"#;
    assert_eq!(point.series_preimage(&columns), expected);
}

/// A column that keeps its value and changes its unit is another file.
#[test]
fn units_of_columns_enter_the_key_of_a_series() {
    let point = point(40, 2, &Index::default());
    let of = |unit: &str| point.series_preimage(&[("field".into(), unit.into(), Value::Number(0.0))]);
    assert_ne!(of("meV"), of("T"));
}

#[test]
fn groups_hold_the_chains_that_are_asked_for() {
    let point = point(40, 3, &Index::default());
    let groups: Vec<_> = point.groups.iter().map(|g| (g.start.as_str(), g.number, g.asked)).collect();
    assert_eq!(groups, [("ordered", 0, 2), ("ordered", 1, 1), ("random", 0, 2), ("random", 1, 1)]);
    assert_eq!(point.starts(), ["ordered", "random"]);
    let mut keys: Vec<Key> = point.groups.iter().map(|g| g.key).collect();
    keys.sort_unstable();
    keys.dedup();
    assert_eq!(keys.len(), 4);
}

/// Rows count from the first on, up to the first gap, in each lane for itself.
#[test]
fn covered_ends_at_a_gap() {
    let mut index = Index::default();
    let group = &point(64, 2, &index).groups[0].clone();
    let of = |index: &Index| covered(index, &group.key, 2, 16);
    assert_eq!(of(&index), [0, 0]);
    record(&mut index, group, &[(0, 0, 16), (0, 2, 16), (1, 0, 5)]);
    assert_eq!(of(&index), [16, 5], "block 1 of the first lane is missing, block 0 of the second is short");
    record(&mut index, group, &[(0, 1, 7), (1, 0, 16), (1, 1, 16), (2, 0, 16)]);
    assert_eq!(of(&index), [23, 32], "the longest recording counts, and a third lane is not asked for");
    record(&mut index, group, &[(0, 1, 16)]);
    assert_eq!(of(&index), [48, 32]);
    assert_eq!(covered(&index, &Key([5; 32]), 1, 16), [0]);
}

#[test]
fn states_of_a_parcel() {
    let mut group = point(64, 2, &Index::default()).groups.remove(0);
    assert_eq!(group.state(1), State::Due);
    group.covered = vec![16, 0];
    assert_eq!((group.state(16), group.state(64)), (State::Partial, State::Partial));
    group.covered = vec![16, 20];
    assert_eq!((group.state(16), group.state(17)), (State::Recorded, State::Partial));
}

/// Rows of a series: by block, start, chain; the last block cut to what is asked for; nothing where anything is missing.
#[test]
fn pieces_come_in_order_of_rows() {
    let mut index = Index::default();
    let groups = point(20, 3, &index).groups;
    for (number, group) in groups.iter().enumerate() {
        for lane in 0..group.asked {
            assert_eq!(point(20, 3, &index).pieces(&index), None, "before lane {lane} of group {number} is there");
            record(&mut index, group, &[(lane, 0, 16), (lane, 1, if number == 1 { 16 } else { 4 })]);
        }
    }
    let recorded = point(20, 3, &index);
    assert!(recorded.is_recorded());
    let pieces = recorded.pieces(&index).unwrap();
    let order: Vec<_> = pieces.iter().map(|p| (p.block, p.start, p.chain, p.recorded, p.rows)).collect();
    let first = [(0, 0), (0, 1), (0, 2), (1, 0), (1, 1), (1, 2)].map(|(start, chain)| (0, start, chain, 16, 16));
    let second = [(0, 0, 4), (0, 1, 4), (0, 2, 16), (1, 0, 4), (1, 1, 4), (1, 2, 4)];
    let second = second.map(|(start, chain, recorded)| (1, start, chain, recorded, 4));
    assert_eq!(order, [first, second].concat());
    assert_eq!(point(21, 3, &index).pieces(&index), None);
    assert_eq!(point(16, 3, &index).pieces(&index).unwrap().len(), 6);
}

/// The forecast counts rules as often as they are done, and sweeps before the first row once.
#[test]
fn updates_that_are_due() {
    let mut due = point(20, 2, &Index::default());
    due.groups.truncate(1);
    // 2^30 sites, 4 passes, 2 lanes; 20 rows every 2 sweeps after 11.
    let per_sweep = 8.0 * (1u64 << 30) as f64;
    assert_eq!(due.updates_due(), per_sweep * 51.0);
    due.groups[0].covered = vec![20, 16];
    assert_eq!(due.updates_due(), per_sweep * 8.0);
    due.groups[0].covered = vec![20, 20];
    assert_eq!(due.updates_due(), 0.0);
}

fn keeping(keep: Keep, measure: u64, index: &Index) -> Point {
    let mut dynamics = dynamics();
    dynamics.nominal_sites = 1 << 30;
    let ask = Ask { keep: Some(keep), starts: vec![Start::Random], ..ask(measure, 2) };
    plan_point(Vec::new(), dynamics, &ask, None, None, index)
}

fn record_state(index: &mut Index, group: &Group, lane: u32, row: u64) {
    let key = Key::of(&group.state_preimage(lane, row));
    let content = ContentHash([row as u8; 32]);
    index.add(Line { key, kind: "state".into(), chain: None, content, seconds: 0.0, updates: 0, note: String::new() });
}

/// Keeping changes no key of chains; a parcel whose blocks are on record is due until its configurations are, too.
#[test]
fn configurations_are_owed_beside_the_blocks() {
    let mut index = Index::default();
    let plain = point(20, 2, &index);
    let group = keeping(Keep::Every(8), 20, &index).groups.remove(0);
    assert_eq!((group.key, &group.stream), (plain.groups[1].key, &plain.groups[1].stream));
    assert_eq!(group.owed, [7, 15]);
    record(&mut index, &group, &[(0, 0, 16), (1, 0, 16), (0, 1, 4), (1, 1, 4)]);
    let planned = keeping(Keep::Every(8), 20, &index);
    assert_eq!((planned.groups[0].state(20), planned.kept(&index)), (State::Partial, None));
    for (lane, row) in [(0, 7), (1, 7), (0, 15)] {
        record_state(&mut index, &group, lane, row);
    }
    assert_eq!(keeping(Keep::Every(8), 20, &index).groups[0].owed, [15]);
    record_state(&mut index, &group, 1, 15);
    let planned = keeping(Keep::Every(8), 20, &index);
    assert_eq!(planned.groups[0].state(20), State::Recorded);
    // `equilibrate` is 10 and `every` 2.
    let kept: Vec<_> = planned.kept(&index).unwrap().iter().map(|k| (k.chain, k.sweep)).collect();
    assert_eq!(kept, [(0, 24), (0, 40), (1, 24), (1, 40)]);
    assert_eq!(keeping(Keep::Last, 20, &index).groups[0].owed, [19]);
    assert_eq!(keeping(Keep::Last, 16, &index).groups[0].state(16), State::Recorded, "row 15 is there");
    assert_eq!(point(20, 2, &index).kept(&index), Some(Vec::new()));
}

/// The forecast: nothing is swept for the configuration at the end of what is on record; for an earlier one the chains are run again.
#[test]
fn updates_for_configurations() {
    let mut index = Index::default();
    let group = keeping(Keep::Last, 20, &index).groups.remove(0);
    record(&mut index, &group, &[(0, 0, 16), (1, 0, 16), (0, 1, 4), (1, 1, 4)]);
    assert_eq!(keeping(Keep::Last, 20, &index).updates_due(), 0.0);
    let per_sweep = 8.0 * (1u64 << 30) as f64;
    // Rows 7 and 15: 16 rows every 2 sweeps after 11.
    assert_eq!(keeping(Keep::Every(8), 20, &index).updates_due(), per_sweep * 43.0);
    assert_eq!(keeping(Keep::Last, 30, &index).updates_due(), per_sweep * 20.0);
}

/// What keys of tables of configurations are made of; the same rows asked for in two ways are the same table.
#[test]
fn value_stability_of_tables_of_configurations() {
    let mut point = keeping(Keep::Every(20), 20, &Index::default());
    point.groups[0].key = Key([0x11; 32]);
    let columns = [("temperature".to_owned(), "K".to_owned(), Value::Number(2.5))];
    let value = point.states_value(&columns).unwrap();
    let expected = r#"{"chains":[{"asked":2,"key":""#.to_owned()
        + &"11".repeat(32)
        + r#""}],"columns":[["temperature","K",2.5]],"rows":[19,0,1]}"#;
    assert_eq!(value.canonical(), expected);
    point.keep = Some(Keep::Last);
    assert_eq!(point.states_value(&columns), Some(value.clone()));
    point.keep = None;
    assert_eq!(point.states_value(&columns), None);
    assert_eq!(states_preimage(vec![value]), format!(r#"{{"kind":"states","points":[{expected}],"revision":1}}"#));
}

/// A sequence: each position begins from the last configurations of the one before, of all chains that are advanced, and its key says so.
#[test]
fn positions_follow_each_other() {
    use crate::sequence::{Parcel, parcels};
    let plan = |index: &Index, measures: &[u64]| -> Vec<Point> {
        let mut points: Vec<Point> = Vec::new();
        for (position, measure) in measures.iter().enumerate() {
            let mut dynamics = dynamics();
            dynamics.nominal_sites = 1 << 30;
            let place = Some(Place { sequence: 0, position: position as u64 });
            points.push(plan_point(Vec::new(), dynamics, &ask(*measure, 3), place, points.last(), index));
        }
        points
    };
    let mut index = Index::default();
    let points = plan(&index, &[16, 16, 16]);
    assert_eq!(points[0].groups[3].begin, Begin::Random);
    let before = &points[0].groups[3];
    let expected = [0, 1].map(|lane| Key::of(&before.state_preimage(lane, 15)));
    assert_eq!(points[1].groups[3].begin, Begin::States(expected.to_vec()), "one chain is asked for, two are advanced");
    assert!((0..3).all(|at| points[at].groups[0].owed == [15]));
    // Four groups of chains (two starts of three chains in lanes of two), each a parcel along the whole sequence.
    let all = parcels(&points);
    assert_eq!(all.len(), 4);
    assert_eq!(all[2], Parcel { parts: vec![(0, 2), (1, 2), (2, 2)] });
    assert_eq!(all[2].state(&points), State::Due);
    let longer = plan(&index, &[16, 16, 16, 16]);
    let keys = |points: &[Point]| points.iter().flat_map(|p| p.groups.iter().map(|g| g.key)).collect::<Vec<_>>();
    assert_eq!(keys(&longer)[..12], keys(&points), "a position that is appended changes none before it");
    let other = plan(&index, &[16, 17, 16]);
    assert_eq!(keys(&other)[..8], keys(&points)[..8], "its own length is in no key");
    assert!(keys(&other)[8..].iter().zip(&keys(&points)[8..]).all(|(a, b)| a != b), "the length before is");
    for (lane, at) in [(0, 0), (1, 0)] {
        record(&mut index, &points[at].groups[0], &[(lane, 0, 16)]);
        record_state(&mut index, &points[at].groups[0], lane, 15);
    }
    let points = plan(&index, &[16, 16, 16]);
    assert_eq!(parcels(&points)[0].state(&points), State::Partial);
    // Two positions of 16 rows every 2 sweeps after 11.
    assert_eq!(parcels(&points)[0].updates_due(&points), 8.0 * (1u64 << 30) as f64 * 86.0);
}
