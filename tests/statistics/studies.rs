//! Samples of the studies of `plant score --study`.

use holdtrue_simulators::score::contest::cores;
use holdtrue_simulators::score::study::{self, Case, Report, Study};

/// Runs the cases chosen by their names, of which there must be so many, with so many runs each
/// (`None`: as many as the whole study), and asserts that all bounds hold.
pub(crate) fn assert_holds(
    study: Study,
    count: usize,
    chosen: impl Fn(&str) -> bool,
    runs: Option<u64>,
) -> Report {
    let mut cases = study.cases();
    cases.retain(|Case { name, .. }| chosen(name));
    assert_eq!(cases.len(), count);
    let report = study::run(&cases, runs, 1, cores(), &|| {});
    println!("{}", report.text());
    let broken = report.broken();
    assert!(broken.is_empty(), "{broken:#?}");
    assert!(
        report
            .measures
            .iter()
            .any(|measure| measure.bound.is_some())
    );
    report
}
