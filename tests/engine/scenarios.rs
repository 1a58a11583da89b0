//! Engine scenarios as data: each file in tests/scenarios is a configuration, inputs, and the
//! outputs that must follow.
//!
//! Format, line by line (`#` begins a comment; times in seconds from the beginning):
//! - `watch pair alarm …`: the kinds of output that are compared; all others may come as they like
//! - `clock live|readings`
//! - `reference NAME measured|constant VALUE|gated VALUE|group A B C … [key value]…`
//! - `channel NAME REFERENCE [key value]…`
//! - inputs: `TIME NAME VALUE [received T] [sequence N] [excluded]`, `TIME gate NAME open|shut`,
//!   `TIME tick`, `TIME refused REASON [NAME]`, `again` (the same setup once more), `supplied NAME
//!   FROM TO` with rows `| TIME NAME VALUE`
//! - `=> OUTPUT`: what the input before it says, in order; an input without any says nothing that
//!   is watched
//! - `next TIME|never`: when the engine wants its next tick
//!
//! Refusals are compared as `refused SUBJECT REASON`, taken from the counters.

use crate::support::{START, at, channel, node, reference, since_start, span};
use holdtrue_engine::engine::Engine;
use holdtrue_engine::event::{
    AlarmChange, AlarmKind, AlarmState, Correction, Gate, Input, Output, PairFate, Reading,
    Refused, RefusedReason, Source, Subject, Supplied,
};
use holdtrue_engine::setup::{
    ChannelId, ChannelSetup, Clock, ReferenceId, ReferenceKind, ReferenceSetup, Setup, Stamped,
    WindowLength,
};
use std::fmt::Write as _;
use std::path::Path;

#[test]
fn every_scenario_says_what_it_must() {
    let folder = Path::new(env!("CARGO_MANIFEST_DIR")).join("tests/scenarios");
    let mut files: Vec<_> = std::fs::read_dir(&folder)
        .expect("the scenarios can be listed")
        .map(|entry| entry.expect("an entry can be read").path())
        .collect();
    files.sort();
    assert!(files.len() >= 15, "scenarios are missing: {files:?}");
    let mut wrong = String::new();
    for file in &files {
        let text = std::fs::read_to_string(file).expect("a scenario can be read");
        let played = play(&text);
        if played.trim_end() != text.trim_end() {
            let name = file.file_name().unwrap_or_default().to_string_lossy();
            writeln!(wrong, "--- {name}: got\n{played}").expect("a string can be written");
        }
    }
    assert!(wrong.is_empty(), "{wrong}");
}

/// Plays a scenario and returns its text with the outputs that really came.
fn play(text: &str) -> String {
    let mut stage = Stage::default();
    let mut lines = text.lines().peekable();
    while let Some(line) = lines.next() {
        let words: Vec<&str> = line
            .split('#')
            .next()
            .unwrap_or_default()
            .split_whitespace()
            .collect();
        if line.starts_with("=>") {
            continue;
        }
        stage.told.push_str(line);
        stage.told.push('\n');
        match words.as_slice() {
            [] => {}
            ["watch", kinds @ ..] => {
                stage.watched = kinds.iter().map(ToString::to_string).collect();
            }
            ["clock", which] => stage.setup.clock = clock(which),
            ["reference", name, rest @ ..] => stage.add_reference(name, rest),
            ["channel", name, of, rest @ ..] => stage.add_channel(name, of, rest),
            ["next", _] => stage.tell_next(),
            ["again"] => stage.step(&Input::Setup(Box::new(stage.setup.clone()))),
            ["supplied", name, from, to] => {
                let mut readings = Vec::new();
                while let Some(row) = lines.next_if(|line| line.starts_with('|')) {
                    stage.told.push_str(row);
                    stage.told.push('\n');
                    let words: Vec<&str> = row[1..].split_whitespace().collect();
                    readings.push(stage.reading(words[0], words[1], words[2], &words[3..]));
                }
                let channel = stage.channel_id(name);
                stage.step(&Input::Supplied(Supplied {
                    channel,
                    from: at(num(from)),
                    to: at(num(to)),
                    readings,
                }));
            }
            words => {
                let input = stage.input(words);
                stage.step(&input);
            }
        }
    }
    stage.told
}

struct Stage {
    setup: Setup,
    engine: Option<Engine>,
    watched: Vec<String>,
    told: String,
}

impl Default for Stage {
    fn default() -> Self {
        Self {
            setup: node(Clock::Readings, Vec::new(), Vec::new()),
            engine: None,
            watched: Vec::new(),
            told: String::new(),
        }
    }
}

impl Stage {
    fn step(&mut self, input: &Input) {
        let setup = self.setup.clone();
        let engine = self
            .engine
            .get_or_insert_with(|| crate::support::engine(setup));
        let before = engine.standing().counters;
        let mut outputs = Vec::new();
        engine.step(input, &mut outputs);
        let after = engine.standing().counters;
        let mut lines: Vec<String> = Vec::new();
        for output in &outputs {
            lines.push(self.describe(output));
        }
        for count in after.all() {
            let more = count.count - before.get(count.subject, count.reason);
            for _ in 0..more {
                lines.push(format!(
                    "refused {} {}",
                    self.name(count.subject),
                    count.reason.code()
                ));
            }
        }
        for line in lines {
            let kind = line.split(' ').next().unwrap_or_default().to_owned();
            if self.watched.contains(&kind) {
                writeln!(self.told, "=> {line}").expect("a string can be written");
            }
        }
    }

    /// Replaces a `next` line by what the engine wants.
    fn tell_next(&mut self) {
        let setup = self.setup.clone();
        let engine = self
            .engine
            .get_or_insert_with(|| crate::support::engine(setup));
        let next = engine
            .next_tick()
            .map_or("never".to_owned(), |time| short(since_start(time)));
        let line = self.told.trim_end().rfind('\n').map_or(0, |end| end + 1);
        self.told.truncate(line);
        writeln!(self.told, "next {next}").expect("a string can be written");
    }

    fn add_reference(&mut self, name: &str, rest: &[&str]) {
        let number = |text: &str| text.parse::<f64>().expect("a constant is a number");
        let (kind, rest) = match rest {
            ["measured", rest @ ..] => (ReferenceKind::Measured, rest),
            ["constant", value, rest @ ..] => (crate::support::constant(number(value)), rest),
            ["gated", value, rest @ ..] => (
                ReferenceKind::Constant {
                    value: number(value),
                    gated: true,
                },
                rest,
            ),
            ["group", members, rest @ ..] => (
                ReferenceKind::Group {
                    // Positions, since the channels come later in the file.
                    members: members
                        .split(',')
                        .map(|id| ChannelId(id.parse().expect("a member is a position")))
                        .collect(),
                },
                rest,
            ),
            _ => panic!("not a reference: {name} {rest:?}"),
        };
        let mut reference = reference(name, kind);
        for pair in rest.chunks(2) {
            set_reference(&mut reference, pair[0], pair[1]);
        }
        self.setup.references.push(reference);
    }

    fn add_channel(&mut self, name: &str, of: &str, rest: &[&str]) {
        let position = self
            .setup
            .references
            .iter()
            .position(|reference| reference.name == of)
            .expect("the reference comes first");
        let mut channel = channel(name, u32::try_from(position).expect("few references"));
        for pair in rest.chunks(2) {
            set_channel(&mut channel, pair[0], pair[1]);
        }
        self.setup.channels.push(channel);
    }

    fn input(&self, words: &[&str]) -> Input {
        match words {
            [time, "tick"] => Input::Tick { now: at(num(time)) },
            [time, "gate", name, state] => Input::Gate(Gate {
                reference: self.reference_id(name),
                received: at(num(time)),
                phenomenon: at(num(time)),
                open: *state == "open",
            }),
            [time, "refused", reason, rest @ ..] => Input::Refused(Refused {
                received: at(num(time)),
                topic: "works/x".to_owned(),
                source: rest.first().map(|name| self.source(name)),
                reason: reason_of(reason),
                detail: "a detail".to_owned(),
            }),
            [time, name, value, rest @ ..] => Input::Reading(self.reading(time, name, value, rest)),
            _ => panic!("not an input: {words:?}"),
        }
    }

    fn reading(&self, time: &str, name: &str, value: &str, rest: &[&str]) -> Reading {
        let phenomenon = if time == "negative" {
            holdtrue_engine::time::Timestamp(-1)
        } else {
            at(num(time))
        };
        let mut reading = Reading {
            source: self.source(name),
            received: phenomenon.max(START),
            phenomenon,
            value: num(value),
            sequence: None,
            excluded: false,
        };
        let mut rest = rest.iter();
        while let Some(word) = rest.next() {
            match *word {
                "excluded" => reading.excluded = true,
                "received" => reading.received = at(num(rest.next().expect("a time"))),
                "sequence" => {
                    let number = rest.next().expect("a running number");
                    reading.sequence = Some(number.parse().expect("a whole number"));
                }
                other => panic!("not a word of a reading: {other}"),
            }
        }
        reading
    }

    fn source(&self, name: &str) -> Source {
        if let Some(position) = self.setup.channels.iter().position(|c| c.name == name) {
            Source::Indication(ChannelId(u32::try_from(position).expect("few channels")))
        } else if name == "nobody" {
            Source::Indication(ChannelId(99))
        } else {
            Source::Reference(self.reference_id(name))
        }
    }

    fn channel_id(&self, name: &str) -> ChannelId {
        match self.source(name) {
            Source::Indication(id) => id,
            Source::Reference(_) | Source::Influence(_) => panic!("{name} is no channel"),
        }
    }

    fn reference_id(&self, name: &str) -> ReferenceId {
        let found = self.setup.references.iter().position(|r| r.name == name);
        let position = found.unwrap_or_else(|| panic!("nothing is called {name}"));
        ReferenceId(u32::try_from(position).expect("few references"))
    }

    fn name(&self, subject: Subject) -> &str {
        match subject {
            Subject::Node => "node",
            Subject::Channel(id) => &self.setup.channels[id.0 as usize].name,
            Subject::Reference(id) => &self.setup.references[id.0 as usize].name,
            Subject::Influence(id) => &self.setup.influences[id.0 as usize].name,
        }
    }

    fn describe(&self, output: &Output) -> String {
        let channel = |id: ChannelId| &self.setup.channels[id.0 as usize].name;
        match output {
            Output::Pair(fate) => describe_pair(channel(fate.channel), fate),
            Output::Correction(document) => {
                describe_correction(channel(document.channel), document)
            }
            Output::Withdrawn { channel: id, .. } => format!("withdrawn {}", channel(*id)),
            Output::Corrected(value) => format!(
                "corrected {} {} {} -> {}",
                channel(value.channel),
                short(since_start(value.phenomenon)),
                short(value.indication),
                short(value.corrected)
            ),
            Output::Outlook(outlook) => format!(
                "outlook {} error {} U {}",
                channel(outlook.channel),
                short(outlook.error),
                short(outlook.expanded_uncertainty)
            ),
            Output::OutlookWithdrawn { channel: id, .. } => {
                format!("outlook withdrawn {}", channel(*id))
            }
            Output::Alarm(change) => describe_alarm(self.name(change.subject), change),
            Output::Degree(change) => {
                format!(
                    "degree {} {} {}",
                    channel(change.channel),
                    change.from,
                    change.to
                )
            }
            Output::Step(step) => format!(
                "step {} {} before {}",
                channel(step.channel),
                short(step.size),
                short(since_start(step.first_after))
            ),
            Output::Notice(notice) => format!(
                "notice {} {} held {}",
                self.name(notice.subject),
                notice.code,
                notice.held_back
            ),
            Output::Answer(answer) => {
                let verdict = if answer.accepted { "done" } else { "refused" };
                format!("answer {} {verdict}", answer.id)
            }
            Output::Validation(validation) => {
                format!("validation {}", channel(validation.channel))
            }
            Output::Wanted {
                channel: id,
                from,
                to,
            } => format!(
                "wanted {} {} {}",
                channel(*id),
                short(since_start(*from)),
                short(since_start(*to))
            ),
        }
    }
}

fn describe_alarm(subject: &str, change: &AlarmChange) -> String {
    format!(
        "alarm {subject} {} {} since {} value {} limit {}",
        kind(change.kind),
        match change.state {
            AlarmState::Normal => "cleared",
            AlarmState::Unacknowledged => "raised",
        },
        short(since_start(change.since)),
        short(change.value),
        short(change.limit)
    )
}

fn describe_pair(channel: &str, fate: &PairFate) -> String {
    let mut line = format!(
        "pair {channel} {} {} {}",
        short(since_start(fate.phenomenon)),
        short(fate.indication),
        short(fate.reference)
    );
    if let Some(rejection) = fate.rejected {
        write!(
            line,
            " kept out: {} {} above {}",
            rejection.reason.code(),
            short(rejection.value),
            short(rejection.threshold)
        )
        .expect("a string can be written");
    }
    line
}

fn describe_correction(channel: &str, document: &Correction) -> String {
    let mut line = format!(
        "correction {channel} {} c {} from {} until {}",
        document.issue_number,
        short(document.correction),
        short(since_start(document.valid_from)),
        short(since_start(document.valid_until))
    );
    if document.suppressed {
        line.push_str(" suppressed");
    }
    line
}

fn kind(kind: AlarmKind) -> &'static str {
    match kind {
        AlarmKind::ErrorLimit => "error-limit",
        AlarmKind::DriftRate => "drift-rate",
        AlarmKind::TimeToLimit => "time-to-limit",
        AlarmKind::ReferenceStale => "reference-stale",
        AlarmKind::ReferenceStep => "reference-step",
        AlarmKind::ReferenceStuck => "reference-stuck",
        AlarmKind::CertificateExpiry => "certificate-expiry",
        AlarmKind::CorrectionLimit => "correction-limit",
        AlarmKind::DataGap => "data-gap",
        AlarmKind::Step => "step",
        AlarmKind::ScreenLockedOut => "screen-locked-out",
        AlarmKind::Stuck => "stuck",
        AlarmKind::NoiseGrowth => "noise-growth",
    }
}

/// At most four decimals, none where there are none.
fn short(value: f64) -> String {
    let text = format!("{value:.4}");
    let text = text.trim_end_matches('0').trim_end_matches('.');
    if text == "-0" {
        "0".to_owned()
    } else {
        text.to_owned()
    }
}

fn num(text: &str) -> f64 {
    text.parse()
        .unwrap_or_else(|_| panic!("not a number: {text}"))
}

fn whole(text: &str) -> u32 {
    text.parse()
        .unwrap_or_else(|_| panic!("not a whole number: {text}"))
}

fn clock(which: &str) -> Clock {
    match which {
        "live" => Clock::Live,
        "readings" => Clock::Readings,
        other => panic!("not a clock: {other}"),
    }
}

fn set_reference(reference: &mut ReferenceSetup, key: &str, value: &str) {
    match key {
        "stale_after" => reference.stale_after = Some(span(num(value))),
        "stands_for" => reference.stands_for = span(num(value)),
        "common" => reference.uncertainty_common = num(value),
        "stamped" => {
            reference.stamped = match value {
                "start" => Stamped::Start,
                "middle" => Stamped::Middle,
                _ => Stamped::End,
            }
        }
        other => panic!("not a key of a reference: {other}"),
    }
}

fn set_channel(channel: &mut ChannelSetup, key: &str, value: &str) {
    match key {
        "lateness" => channel.lateness = span(num(value)),
        "lag" => channel.lag = span(num(value)),
        "max_gap" => channel.max_gap = span(num(value)),
        "gap_after" => channel.alarms.gap_after = Some(span(num(value))),
        "delay" => channel.alarms.delay = whole(value),
        "mpe" => channel.max_permissible_error = Some(num(value)),
        "drift" => channel.max_drift_rate = Some(num(value)),
        "resolution" => channel.resolution = num(value),
        "noise" => channel.noise = num(value),
        "max_age" => channel.publish.max_age = span(num(value)),
        "corrected" => channel.corrected_values = value == "yes",
        "screening" => channel.screening.enabled = value == "on",
        "pairs" => {
            let pairs = whole(value);
            channel.fit.window = WindowLength::Pairs(pairs);
            channel.fit.segments = channel.fit.segments.min(pairs);
        }
        "degree" => channel.fit.forced_degree = Some(value.parse().expect("a degree is a digit")),
        "range" => {
            let (low, high) = value.split_once("..").expect("a range is LOW..HIGH");
            channel.screening.range = Some((num(low), num(high)));
        }
        other => panic!("not a key of a channel: {other}"),
    }
}

fn reason_of(code: &str) -> RefusedReason {
    [
        RefusedReason::UnknownTopic,
        RefusedReason::Empty,
        RefusedReason::Oversize,
        RefusedReason::Unreadable,
        RefusedReason::Missing,
        RefusedReason::WrongType,
        RefusedReason::NotFinite,
        RefusedReason::BadTime,
        RefusedReason::Retained,
    ]
    .into_iter()
    .find(|reason| reason.code() == code)
    .unwrap_or_else(|| panic!("not a reason of the shell: {code}"))
}
