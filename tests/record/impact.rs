//! A reference turns out to have been bad: every correction that rested on it is listed, a fit
//! without it takes their place, and all of it replays.

use super::station::{START, open, setup, work};
use holdtrue::record::Archive;
use holdtrue::replay::{Range, audit};
use holdtrue_engine::event::{About, Input, Interval, Order, Quarantine, Wish};
use holdtrue_engine::time::Timestamp;
use std::collections::BTreeSet;

const HOUR: i64 = 3600;

fn at(hours: i64) -> Timestamp {
    Timestamp((START + hours * HOUR) * 1_000_000_000)
}

fn quarantine() -> Input {
    Input::Order(Box::new(Order {
        received: at(72),
        id: "q-17".to_owned(),
        reply_to: None,
        wish: Wish::Quarantine(Quarantine {
            by: "M. Ito".to_owned(),
            about: About::Reference("mast".to_owned()),
            interval: Interval {
                from: at(54),
                to: Some(at(60)),
            },
            note: "ice on the mast".to_owned(),
        }),
    }))
}

#[test]
fn every_correction_from_a_window_that_holds_part_of_it_is_listed_and_replaced() {
    let folder = tempfile::tempdir().unwrap();
    let mut keeper = open(folder.path(), START);
    keeper.adopt(&setup(24)).unwrap();
    work(&mut keeper, START, 72 * HOUR);
    keeper.take(&quarantine());
    keeper.commit(at(72)).unwrap();
    keeper.answer_wanted().unwrap();
    keeper.commit(at(72)).unwrap();
    work(&mut keeper, START + 72 * HOUR, 2 * HOUR);
    keeper.finish(at(74)).unwrap();

    let archive = Archive::open(folder.path()).unwrap();
    let (mut listed, mut expected, mut superseded) = (BTreeSet::new(), BTreeSet::new(), 0);
    for name in archive.days() {
        let connection = rusqlite::Connection::open(archive.path(*name)).unwrap();
        let column = |query: &str| -> Vec<i64> {
            let mut statement = connection.prepare(query).unwrap();
            let rows = statement.query_map([], |row| row.get(0)).unwrap();
            rows.map(Result::unwrap).collect()
        };
        listed.extend(column(
            "SELECT issue_number FROM impacts WHERE channel = 'shore/t-1'",
        ));
        // By hand, from what was published before the order came.
        let (from, to, told) = (at(54).0, at(60).0, at(72).0);
        expected.extend(column(&format!(
            "SELECT json_extract(body, '$.Correction.issue_number') FROM outputs
             JOIN sources ON number = subject
             WHERE outputs.kind = 'correction' AND name = 'shore/t-1'
             AND json_extract(body, '$.Correction.window.to') >= {from}
             AND json_extract(body, '$.Correction.window.from') < {to}
             AND json_extract(body, '$.Correction.issued') < {told}"
        )));
        superseded += column(
            "SELECT count(*) FROM outputs WHERE kind = 'correction'
             AND json_extract(body, '$.Correction.supersedes.order') = 'q-17'",
        )[0];
    }
    assert!(expected.len() > 3, "{expected:?}");
    assert_eq!(listed, expected);
    assert!(superseded >= 2, "both channels are fitted anew");
    let audit = audit(&archive, Range::default(), &mut |_| {}).unwrap();
    assert_eq!(audit.difference, None);
}
