use super::*;
use spinledger_terms::ContentHash;

fn item(library: &str, name: &str, parameters: Value, standard: bool) -> ItemRef {
    let identity = Identity {
        library: library.into(),
        version: "0.1.0".into(),
        item: name.into(),
        revision: 2,
        standard,
        file: "/somewhere/lib.so".into(),
        file_hash: ContentHash([0xab; 32]),
    };
    ItemRef { identity, parameters }
}

pub(crate) fn dynamics() -> Dynamics {
    let none = || Value::Map(Default::default());
    Dynamics {
        seed: 7,
        lattice: item("lattices", "square", Value::map([("size", Value::Integer(4))]), true),
        model: item("models", "ising", Value::map([("coupling", Value::Number(1.0))]), true),
        update: vec![
            (item("local-updates", "metropolis", Value::map([("lanes", Value::Integer(2))]), true), 1),
            (item("mine", "swap", none(), false), 3),
        ],
        observe: vec![item("observables", "energy", none(), true)],
        inverse_temperature: 0.4,
        temperature: 2.5,
        boltzmann: 1.0,
        energy_unit: "meV".into(),
        equilibrate: 10,
        every: 2,
        settle: 1,
        lanes: 2,
        nominal_sites: 16,
    }
}

/// What keys of chains are made of. Another text makes every ledger start anew.
#[test]
fn value_stability_of_groups() {
    let hash = "ab".repeat(32);
    let expected =
        r#"{"block_rows":65536,"energy_unit":"meV","equilibrate":10,"every":2,"group":3,"inverse_temperature":0.4,"#
            .to_owned()
            + r#""kind":"chains","lanes":2,"lattice":{"item":"lattices/square@2","parameters":{"size":4}},"#
            + r#""model":{"item":"models/ising@2","parameters":{"coupling":1.0}},"#
            + r#""observe":[{"item":"observables/energy@2","parameters":{}}],"revision":1,"seed":7,"settle":1,"start":"random","#
            + r#""update":[{"item":"local-updates/metropolis@2","parameters":{"lanes":2},"times":1},{"item":"mine/swap@2#"#
            + &hash
            + r#"","parameters":{},"times":3}]}"#;
    assert_eq!(dynamics().group_value(&Start::Random, 3, None).canonical(), expected);
}

/// What random streams are made of. Another text makes other random numbers.
#[test]
fn value_stability_of_streams() {
    let expected = r#"{"group":3,"inverse_temperature":0.4,"lanes":2,"lattice":{"item":"lattices/square","parameters":{"size":4}},"#
        .to_owned()
        + r#""model":{"item":"models/ising","parameters":{"coupling":1.0}},"seed":7,"start":"random","#
        + r#""update":[{"item":"local-updates/metropolis","parameters":{"lanes":2},"times":1},"#
        + r#"{"item":"mine/swap","parameters":{},"times":3}]}"#;
    assert_eq!(dynamics().stream_preimage(&Start::Random, 3, None), expected);
}

/// Everything that the data depend on changes the key; what they do not depend on, does not.
#[test]
fn keys_see_what_data_depend_on() {
    let of = |change: &dyn Fn(&mut Dynamics)| {
        let mut changed = dynamics();
        change(&mut changed);
        (changed.group_value(&Start::Random, 0, None).canonical(), changed.stream_preimage(&Start::Random, 0, None))
    };
    let (key, stream) = of(&|_| {});
    let moves: [&dyn Fn(&mut Dynamics); 7] = [
        &|d| d.seed = 8,
        &|d| d.lattice.parameters.set("size", Value::Integer(5)).then_some(()).unwrap(),
        &|d| d.model.identity.item = "potts".into(),
        &|d| d.update[1].1 = 2,
        &|d| d.update.reverse(),
        &|d| d.inverse_temperature = 0.5,
        &|d| d.lanes = 4,
    ];
    for (number, change) in moves.iter().enumerate() {
        let changed = of(change);
        assert!(changed.0 != key && changed.1 != stream, "change {number} of what moves the spins");
    }
    let recorded: [&dyn Fn(&mut Dynamics); 7] = [
        &|d| d.model.identity.revision = 3,
        &|d| d.update[1].0.identity.file_hash = ContentHash([1; 32]),
        &|d| d.observe[0].identity.revision = 3,
        &|d| d.equilibrate = 11,
        &|d| d.every = 3,
        &|d| d.energy_unit = "K".into(),
        // Another length of blocks orders rows differently.
        &|d| d.nominal_sites = 1 << 20,
    ];
    for (number, change) in recorded.iter().enumerate() {
        let changed = of(change);
        assert!(changed.0 != key && changed.1 == stream, "change {number} of what is recorded of them");
    }
    let nothing: [&dyn Fn(&mut Dynamics); 5] = [
        &|d| d.model.identity.file_hash = ContentHash([1; 32]),
        &|d| d.model.identity.file = "/elsewhere".into(),
        &|d| d.model.identity.version = "0.2.0".into(),
        &|d| d.nominal_sites = 17,
        &|d| d.temperature = 2.500_000_000_000_000_4,
    ];
    for (number, change) in nothing.iter().enumerate() {
        assert_eq!(of(change), (key.clone(), stream.clone()), "change {number} of what does not matter");
    }
}

/// What keys and streams of sequences are made of: position and start in both; what is followed, with its length, in the key only.
#[test]
fn value_stability_of_sequences() {
    use spinledger_terms::Key;
    let of = |follows: Follows| {
        let dynamics = dynamics();
        let mut value = dynamics.group_value(&Start::Ordered, 0, Some(&follows));
        let Value::Map(map) = &mut value else { panic!("a mapping") };
        map.retain(|key, _| ["follows", "position", "start"].contains(&key.as_str()));
        (value.canonical(), dynamics.stream_preimage(&Start::Ordered, 0, Some(&follows)))
    };
    let first = of(Follows { position: 0, before: None });
    assert_eq!(first.0, r#"{"position":0,"start":"ordered"}"#);
    let second = of(Follows { position: 1, before: Some((Key([0x11; 32]), 40)) });
    let expected =
        r#"{"follows":{"group":""#.to_owned() + &"11".repeat(32) + r#"","rows":40},"position":1,"start":"ordered"}"#;
    assert_eq!(second.0, expected);
    assert!(second.1.contains(
        r#""model":{"item":"models/ising","parameters":{"coupling":1.0}},"position":1,"seed":7,"start":"ordered""#
    ));
    let longer = of(Follows { position: 1, before: Some((Key([0x11; 32]), 41)) });
    assert!(longer.0 != second.0 && longer.1 == second.1, "the length before is no physical identity of the stream");
}
