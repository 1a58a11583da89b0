//! The state in parts: stored and read back at any instant, all of it or only what changed, it
//! makes an engine that cannot be told from the one that never stopped.

use crate::stream::{CHANNELS, Shell, below, inputs};
use crate::support::{at, channel, constant, engine, indication, node, reference};
use holdtrue::state::{decode, encode};
use holdtrue_engine::engine::Engine;
use holdtrue_engine::event::{Input, Output};
use holdtrue_engine::setup::Clock;
use holdtrue_engine::state::PartId;
use rand_chacha::ChaCha12Rng;
use rand_chacha::rand_core::SeedableRng as _;
use std::collections::{BTreeMap, BTreeSet};

/// Parts as a record holds them.
type Stored = BTreeMap<PartId, Vec<u8>>;

/// All parts.
fn all(engine: &Engine) -> Stored {
    let encoded = |id| encode(engine, id).expect("a part of its own");
    engine.parts().map(|id| (id, encoded(id))).collect()
}

fn read(stored: &Stored) -> Engine {
    let parts = stored.iter().map(|(id, bytes)| (*id, bytes.as_slice()));
    decode(parts).expect("what was stored can be read")
}

/// Runs a stream; `stop` may put another engine in the place of the one at work.
fn run(seed: u64, turns: u32, mut stop: impl FnMut(&mut Engine)) -> (Stored, Vec<Output>) {
    let mut engine = Engine::new();
    let mut shell = Shell::default();
    for input in &inputs(seed, turns) {
        shell.step(&mut engine, input);
        stop(&mut engine);
    }
    (all(&engine), shell.said().to_vec())
}

/// As text, which shows every digit: the first place where two differ is found by eye.
fn assert_same(found: &(Stored, Vec<Output>), expected: &(Stored, Vec<Output>), seed: u64) {
    for (found, expected) in found.1.iter().zip(&expected.1) {
        assert_eq!(format!("{found:?}"), format!("{expected:?}"), "seed {seed}");
    }
    assert_eq!(found.1.len(), expected.1.len(), "seed {seed}");
    let changed = |id: &&PartId| found.0.get(id) != expected.0.get(id);
    let differing: Vec<_> = expected.0.keys().filter(changed).collect();
    assert!(differing.is_empty(), "seed {seed}: {differing:?}");
    assert_eq!(found.0.len(), expected.0.len());
}

#[test]
fn cut_anywhere_it_goes_on_as_if_it_had_not_been() {
    for seed in 1..=6 {
        let uninterrupted = run(seed, 400, |_| {});
        let mut random = ChaCha12Rng::seed_from_u64(1000 + seed);
        let cut = run(seed, 400, |engine| {
            if below(&mut random, 30) == 0 {
                let restored = read(&all(engine));
                assert!(restored == *engine, "seed {seed}");
                *engine = restored;
            }
        });
        assert_same(&cut, &uninterrupted, seed);
    }
}

#[test]
fn what_changed_over_what_was_saved_is_the_whole() {
    for seed in 21..=26 {
        let uninterrupted = run(seed, 400, |_| {});
        let mut random = ChaCha12Rng::seed_from_u64(2000 + seed);
        let mut saved = Stored::new();
        let (mut written, mut whole) = (0, 0);
        let cut = run(seed, 400, |engine| {
            if below(&mut random, 5) == 0 {
                let changed = engine.changed();
                let part = |&id: &PartId| (id, encode(engine, id).expect("a part of its own"));
                saved.extend(changed.iter().map(part));
                engine.mark_saved();
                written += changed.len();
                whole += engine.parts().count();
                if below(&mut random, 4) == 0 {
                    let mut restored = read(&saved);
                    assert!(restored == *engine, "seed {seed}");
                    assert_eq!(all(&restored), all(engine), "seed {seed}");
                    restored.mark_saved();
                    *engine = restored;
                }
            }
        });
        assert_same(&cut, &uninterrupted, seed);
        assert!(2 * written < whole, "{written} of {whole} parts");
    }
}

/// The streams must reach what the tests above are about.
#[test]
fn the_streams_say_everything() {
    let mut kinds = BTreeSet::new();
    for seed in (1..=6).chain(21..=26) {
        for output in &run(seed, 400, |_| {}).1 {
            let text = format!("{output:?}");
            kinds.insert(text.split(['(', ' ']).next().expect("a name").to_owned());
        }
    }
    let all = [
        "Alarm",
        "Answer",
        "Correction",
        "Degree",
        "Notice",
        "Outlook",
        "Pair",
        "Step",
        "Validation",
        "Wanted",
        "Withdrawn",
    ];
    for kind in all {
        assert!(kinds.contains(kind), "no {kind} among {kinds:?}");
    }
}

#[test]
fn only_what_a_reading_touches_is_to_be_saved_again() {
    let channels = (0..CHANNELS).map(|id| channel(&format!("c{id}"), 0));
    let references = vec![reference("zero", constant(0.0))];
    let mut engine = engine(node(Clock::Live, references, channels.collect()));
    let everything: BTreeSet<_> = engine.parts().collect();
    assert_eq!(engine.changed(), everything, "nothing was saved yet");
    // The first of all wakes everybody.
    engine.step(&indication(2, 0.0, 0.1), &mut Vec::new());
    engine.mark_saved();
    assert_eq!(engine.changed(), BTreeSet::from([PartId::Node]));
    engine.step(&indication(2, 60.0, 0.1), &mut Vec::new());
    let touched = BTreeSet::from([PartId::Node, PartId::Channel(2)]);
    assert_eq!(engine.changed(), touched);
    engine.step(&indication(2, 60.0, 0.1), &mut Vec::new());
    let mut refused = touched;
    refused.insert(PartId::Counters);
    assert_eq!(engine.changed(), refused, "a duplicate is counted");
    engine.mark_saved();
    engine.step(&Input::Tick { now: at(61.0) }, &mut Vec::new());
    assert_eq!(engine.changed(), BTreeSet::from([PartId::Node]));
}

/// An engine on whose state the tests below work.
fn worked() -> Engine {
    let mut engine = Engine::new();
    let mut shell = Shell::default();
    for input in &inputs(3, 300) {
        shell.step(&mut engine, input);
    }
    engine
}

#[test]
fn a_missing_part_is_told_by_name_and_one_too_many_is_passed_over() {
    let engine = worked();
    let stored = all(&engine);
    for id in engine.parts() {
        let rest = stored.iter().filter(|(other, _)| **other != id);
        let error = decode(rest.map(|(id, bytes)| (*id, bytes.as_slice()))).expect_err("missing");
        assert_eq!(error.part, id);
        assert_eq!(
            error.to_string(),
            format!("part {id} of the engine's state is missing")
        );
    }
    let mut more = stored;
    more.insert(PartId::Channel(77), vec![1, 2, 3]);
    assert!(read(&more) == engine);
}

/// Whatever the disk makes of a part, reading it says so by its name, or makes an engine; it never
/// fails otherwise.
#[test]
fn a_damaged_part_is_told_by_name() {
    let engine = worked();
    let stored = all(&engine);
    let ids: Vec<PartId> = engine.parts().collect();
    let mut random = ChaCha12Rng::seed_from_u64(3000);
    let mut told = 0;
    for turn in 0..1000 {
        let id = ids[below(&mut random, u32::try_from(ids.len()).expect("few")) as usize];
        let mut damaged = stored.clone();
        let bytes = damaged.get_mut(&id).expect("stored");
        let place = below(&mut random, u32::try_from(bytes.len()).expect("small")) as usize;
        match turn % 4 {
            0 => bytes.truncate(place),
            1 => bytes.push(7),
            2 => bytes[place] = 0xff,
            _ => bytes[place] ^= 1 << below(&mut random, 8),
        }
        let parts = damaged.iter().map(|(id, bytes)| (*id, bytes.as_slice()));
        match decode(parts) {
            Err(error) => {
                told += 1;
                // A setup that says something else makes other parts unfit.
                assert!(error.part == id || id == PartId::Setup, "{id}: {error}");
            }
            Ok(_) => assert!(turn % 4 > 1, "{id}: too short or too long, and taken"),
        }
    }
    assert!(told > 500, "{told}");
}
