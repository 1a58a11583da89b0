//! Whoever changes the engine's arithmetic or the types of its state must raise a revision: records
//! of before are then told from records that were tampered with.

use super::station::{START, open, setup, work};
use holdtrue::keeper::whole;
use holdtrue::record::{ARITHMETIC_REVISION, Archive, Digest, RecordError, STATE_REVISION};

/// Revisions, and what a run of three days says and leaves under them: digests of all outputs and
/// of the saved state at the end.
const GOLDEN: (i64, i64, &str, &str) = (
    1,
    2,
    "030f02f841a9daba43db6a9b60bb9cd240cf54166675deb9445c0733667d8339",
    "87654604041195909e90005e4699753df80281d8ae59824c567b538c1049bd76",
);

#[test]
fn a_change_of_arithmetic_or_state_raises_its_revision() {
    let folder = tempfile::tempdir().unwrap();
    let mut keeper = open(folder.path(), START);
    keeper.adopt(&setup(24)).unwrap();
    work(&mut keeper, START, 3 * 86_400);
    let mut state = Vec::new();
    for (part, bytes) in whole(keeper.engine(), &[]) {
        state.extend_from_slice(part.as_bytes());
        state.extend_from_slice(&bytes);
    }
    let mut outputs = String::new();
    Archive::open(folder.path())
        .unwrap()
        .walk::<RecordError>(|row| {
            for said in row.outputs {
                outputs.push_str(&said.body);
                outputs.push('\n');
            }
            Ok(())
        })
        .unwrap();
    let outputs = Digest::of(outputs.as_bytes()).to_string();
    let state = Digest::of(&state).to_string();
    let now = (ARITHMETIC_REVISION, STATE_REVISION, &*outputs, &*state);
    assert_eq!(
        now, GOLDEN,
        "the same inputs lead to other bits than when this was written. If that is meant: raise \
         the revision in src/record/revision.rs (arithmetic for outputs, state for the state), and \
         write the new values here"
    );
}
