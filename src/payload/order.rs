//! From an MQTT message on an order topic to an order, or to everything that is wrong with it.
//!
//! Unlike a reading, an order is always answered, so nothing is dropped here: what can't be used
//! becomes an order with a list of problems, each naming the field, its value and the way out.

use super::fault::{excerpt, excerpt_bytes};
use super::instant;
use holdtrue_engine::event::{
    About, Act, CheckPoint, Input, Interval, Order, Problem, Quarantine, Release, ReplyTo,
    ServiceEvent, Wish,
};
use holdtrue_engine::time::Timestamp;
use serde_json::{Map, Value};

/// Largest order that is looked at, bytes.
const PAYLOAD_MAX: usize = 65_536;
/// Longest id, name, serial number or certificate, in characters.
pub(crate) const WORD_MAX: usize = 200;
/// Longest note, in characters.
const NOTE_MAX: usize = 2000;
/// Most readings in `as_found` or `as_left`.
const POINTS_MAX: usize = 32;
/// Most problems that one answer lists.
const PROBLEMS_MAX: usize = 20;
/// Largest magnitude of a number, as for readings.
const LARGEST: f64 = 1e100;

/// Reads the orders of one node.
#[derive(Clone, Debug)]
pub struct OrderIntake {
    /// `holdtrue/<node>/`.
    own: String,
}

/// An order's message.
#[derive(Clone, Copy, Debug)]
pub struct OrderMessage<'a> {
    /// The last levels of its topic.
    pub verb: &'a str,
    /// The payload.
    pub payload: &'a [u8],
    /// It was published with the retain flag.
    pub retained: bool,
    /// Where its sender wants the answer.
    pub reply_to: Option<&'a ReplyTo>,
}

impl OrderIntake {
    /// Of the node with this name.
    #[must_use]
    pub fn new(node: &str) -> Self {
        Self {
            own: format!("holdtrue/{node}/"),
        }
    }

    /// What kind of order a topic carries; `None`: none.
    #[must_use]
    pub fn verb<'topic>(&self, topic: &'topic str) -> Option<&'topic str> {
        topic.strip_prefix(&self.own)?.strip_prefix("order/")
    }

    /// The input that a message stands for. None for the empty retained message by which a person
    /// clears an order that should not have been retained.
    #[must_use]
    pub fn take(&self, message: &OrderMessage<'_>, received: Timestamp) -> Option<Input> {
        if message.retained && message.payload.is_empty() {
            return None;
        }
        let (id, wish) = read(message);
        let reply_to = message
            .reply_to
            .filter(|reply| self.may_answer_on(&reply.topic));
        Some(Input::Order(Box::new(Order {
            received,
            id,
            reply_to: reply_to.cloned(),
            wish,
        })))
    }

    /// Whether a response topic can be published to, and is not one of our own documents' or
    /// orders': an answer there would pass for something else. If it is, the answer goes to the
    /// common topic.
    fn may_answer_on(&self, topic: &str) -> bool {
        let fits =
            !topic.is_empty() && !topic.starts_with('$') && !topic.contains(['+', '#', '\0']);
        let ours = topic.strip_prefix(&self.own);
        fits && ours.is_none_or(|rest| rest == "answer" || rest.starts_with("answer/"))
    }
}

/// The id, where there is one, and what is wanted.
fn read(message: &OrderMessage<'_>) -> (String, Wish) {
    let whole = |value: String, way_out: String| {
        let problem = Problem {
            field: String::new(),
            value,
            way_out,
        };
        (String::new(), Wish::Unusable(vec![problem]))
    };
    if message.payload.len() > PAYLOAD_MAX {
        let size = message.payload.len();
        return whole(
            excerpt_bytes(message.payload),
            format!("it has {size} bytes, an order at most {PAYLOAD_MAX}; shorten it"),
        );
    }
    let parsed = serde_json::from_slice::<Value>(message.payload);
    let object = match parsed {
        Ok(Value::Object(object)) => object,
        Ok(_) => {
            return whole(
                excerpt_bytes(message.payload),
                "an order is a JSON object: {\"id\": …, \"channel\": …, \"act\": …, \"by\": …}"
                    .to_owned(),
            );
        }
        Err(error) => {
            return whole(
                excerpt_bytes(message.payload),
                format!("not JSON ({error}); an order is a JSON object in UTF-8"),
            );
        }
    };
    let mut fields = Fields::new(&object);
    let id = fields
        .need_text("id", "any text that no other order bears")
        .unwrap_or_default();
    if message.retained {
        fields.problem(
            "",
            message.verb,
            "it was published with the retain flag: the broker would repeat it at each \
             subscription, also after later orders; clear it (an empty retained message on its \
             topic) and publish it without",
        );
    }
    let wish = match message.verb {
        "service" => service(&mut fields).map(Wish::Service),
        "quarantine" => quarantine(&mut fields).map(Wish::Quarantine),
        "release" => release(&mut fields).map(Wish::Release),
        _ => {
            fields.unknown_verb(message.verb);
            None
        }
    };
    let wish = match (wish, fields.finish()) {
        (Some(wish), problems) if problems.is_empty() => wish,
        (_, problems) => Wish::Unusable(problems),
    };
    (id, wish)
}

/// A service event; `None` if something is missing, which is then among the problems.
fn service(fields: &mut Fields<'_>) -> Option<ServiceEvent> {
    let about = about(fields);
    let act = act(fields);
    let by = fields.need_text("by", "the name of who did it");
    let at = fields.time("at");
    let as_found = fields.points("as_found");
    let as_left = fields.points("as_left");
    let serial = fields.text("serial", WORD_MAX);
    let certificate = fields.text("certificate", WORD_MAX);
    let note = fields.text("note", NOTE_MAX).unwrap_or_default();
    fields.refuse_unknown();
    Some(ServiceEvent {
        by: by?,
        about: about?,
        at,
        act: act?,
        as_found,
        as_left,
        serial,
        certificate,
        note,
    })
}

/// A quarantine; `None` as for a service event.
fn quarantine(fields: &mut Fields<'_>) -> Option<Quarantine> {
    let about = source(fields);
    let by = fields.need_text("by", "the name of who says so");
    let from = fields.need_time("from", "the first time at which its values are bad");
    let to = fields.time("to");
    let note = fields.text("note", NOTE_MAX).unwrap_or_default();
    fields.refuse_unknown();
    Some(Quarantine {
        by: by?,
        about: about?,
        interval: Interval { from: from?, to },
        note,
    })
}

/// The release of a quarantine; `None` as for a service event.
fn release(fields: &mut Fields<'_>) -> Option<Release> {
    let quarantine = fields.need_text("quarantine", "the id of the order that began it");
    let by = fields.need_text("by", "the name of who says so");
    let note = fields.text("note", NOTE_MAX).unwrap_or_default();
    fields.refuse_unknown();
    Some(Release {
        by: by?,
        quarantine: quarantine?,
        note,
    })
}

/// Whose values a quarantine is about.
fn source(fields: &mut Fields<'_>) -> Option<About> {
    let named = [
        fields.text("channel", WORD_MAX).map(About::Channel),
        fields.text("reference", WORD_MAX).map(About::Reference),
        fields.text("influence", WORD_MAX).map(About::Influence),
    ];
    let mut named = named.into_iter().flatten();
    match (named.next(), named.next()) {
        (Some(about), None) => Some(about),
        (Some(about), Some(_)) => {
            let way_out =
                "name one of channel, reference and influence; for more, send more orders";
            fields.problem("channel", about.name(), way_out);
            None
        }
        (None, _) => {
            // Where one is there and not a text, that has been told.
            if !["channel", "reference", "influence"]
                .iter()
                .any(|name| fields.has(name))
            {
                let way_out = "missing; name whose values are bad, as it is configured \
                               (or, for others, `reference` or `influence`)";
                fields.problem("channel", "", way_out);
            }
            None
        }
    }
}

fn about(fields: &mut Fields<'_>) -> Option<About> {
    let channel = fields.text("channel", WORD_MAX);
    let reference = fields.text("reference", WORD_MAX);
    match (channel, reference) {
        (Some(name), None) => Some(About::Channel(name)),
        (None, Some(name)) => Some(About::Reference(name)),
        (Some(channel), Some(_)) => {
            let way_out = "name either a channel or a reference; for both, send two orders";
            fields.problem("channel", &channel, way_out);
            None
        }
        (None, None) => {
            // Where one is there and not a text, that has been told.
            if !fields.has("channel") && !fields.has("reference") {
                let way_out = "missing; name what was served, as it is configured \
                               (or, for a reference, `reference`)";
                fields.problem("channel", "", way_out);
            }
            None
        }
    }
}

fn act(fields: &mut Fields<'_>) -> Option<Act> {
    const ACTS: [Act; 4] = [Act::Adjusted, Act::Cleaned, Act::Replaced, Act::Calibrated];
    const ONE_OF: &str = "one of adjusted, cleaned, replaced, calibrated";
    let word = fields.need_text("act", ONE_OF)?;
    let act = ACTS.into_iter().find(|act| act.word() == word);
    if act.is_none() {
        fields.problem("act", &word, &format!("no act of service; {ONE_OF}"));
    }
    act
}

/// The fields of an order while they are read, and what is wrong with them.
struct Fields<'a> {
    object: &'a Map<String, Value>,
    asked: Vec<&'static str>,
    problems: Vec<Problem>,
}

impl<'a> Fields<'a> {
    fn new(object: &'a Map<String, Value>) -> Self {
        Self {
            object,
            asked: Vec::new(),
            problems: Vec::new(),
        }
    }

    fn problem(&mut self, field: &str, value: &str, way_out: &str) {
        self.problems.push(Problem {
            field: field.to_owned(),
            value: if value.is_empty() {
                String::new()
            } else {
                excerpt(value)
            },
            way_out: way_out.to_owned(),
        });
    }

    fn has(&self, name: &str) -> bool {
        self.object.get(name).is_some_and(|value| !value.is_null())
    }

    /// What stands in a field; `null` counts as nothing.
    fn get(&mut self, name: &'static str) -> Option<&'a Value> {
        self.asked.push(name);
        self.object.get(name).filter(|value| !value.is_null())
    }

    fn text(&mut self, name: &'static str, longest: usize) -> Option<String> {
        match self.get(name)? {
            Value::String(text) if text.trim().is_empty() => {
                self.problem(name, "", "it is empty; leave it out or fill it");
                None
            }
            Value::String(text) if text.chars().count() > longest => {
                self.problem(name, text, &format!("longer than {longest} characters"));
                None
            }
            Value::String(text) => Some(text.trim().to_owned()),
            other => {
                self.problem(name, &other.to_string(), "write a text in quotes");
                None
            }
        }
    }

    fn need_text(&mut self, name: &'static str, what: &str) -> Option<String> {
        let found = self.text(name, WORD_MAX);
        if found.is_none() && self.object.get(name).is_none_or(Value::is_null) {
            self.problem(name, "", &format!("missing; {what}"));
        }
        found
    }

    fn need_time(&mut self, name: &'static str, what: &str) -> Option<Timestamp> {
        let found = self.time(name);
        if found.is_none() && !self.has(name) {
            self.problem(name, "", &format!("missing; {what}"));
        }
        found
    }

    fn time(&mut self, name: &'static str) -> Option<Timestamp> {
        let text = self.text(name, WORD_MAX)?;
        match instant::from_text(&text) {
            Ok(time) => Some(time),
            Err(fault) => {
                self.problem(name, &text, &fault.detail);
                None
            }
        }
    }

    fn points(&mut self, name: &'static str) -> Vec<CheckPoint> {
        const SHAPE: &str =
            "a list such as [{\"indication\": 7.12, \"reference\": 7.00, \"uncertainty\": 0.02}]";
        let Some(value) = self.get(name) else {
            return Vec::new();
        };
        let Some(list) = value.as_array().filter(|list| list.len() <= POINTS_MAX) else {
            let way_out = format!("{SHAPE} with at most {POINTS_MAX} entries");
            self.problem(name, &value.to_string(), &way_out);
            return Vec::new();
        };
        let mut points = Vec::new();
        for (index, entry) in list.iter().enumerate() {
            let place = format!("{name}[{index}]");
            match entry.as_object() {
                Some(entry) => points.extend(self.point(&place, entry)),
                None => self.problem(&place, &entry.to_string(), SHAPE),
            }
        }
        points
    }

    fn point(&mut self, place: &str, entry: &Map<String, Value>) -> Option<CheckPoint> {
        let known = ["indication", "reference", "uncertainty"];
        for name in entry.keys().filter(|name| !known.contains(&name.as_str())) {
            let field = format!("{place}.{name}");
            self.problem(&field, "", "unknown; indication, reference, uncertainty");
        }
        let indication = self.number(place, entry, "indication");
        let reference = self.number(place, entry, "reference");
        let uncertainty = entry.get("uncertainty").filter(|value| !value.is_null());
        let expanded_uncertainty = if uncertainty.is_some() {
            let value = self.number(place, entry, "uncertainty")?;
            if value < 0.0 {
                let field = format!("{place}.uncertainty");
                let way_out = "an expanded uncertainty (k = 2) is not negative";
                self.problem(&field, &value.to_string(), way_out);
                return None;
            }
            Some(value)
        } else {
            None
        };
        Some(CheckPoint {
            indication: indication?,
            reference: reference?,
            expanded_uncertainty,
        })
    }

    fn number(&mut self, place: &str, entry: &Map<String, Value>, name: &str) -> Option<f64> {
        let field = format!("{place}.{name}");
        let Some(value) = entry.get(name) else {
            self.problem(&field, "", "missing; a number in the channel's unit");
            return None;
        };
        let number = value.as_f64().filter(|number| number.abs() <= LARGEST);
        if number.is_none() {
            let way_out = "write a number in the channel's unit, without quotes";
            self.problem(&field, &value.to_string(), way_out);
        }
        // Adding zero turns −0 into 0.
        number.map(|number| number + 0.0)
    }

    fn unknown_verb(&mut self, verb: &str) {
        let way_out =
            "no such order; this version takes order/service, order/quarantine and order/release";
        self.problem("", verb, way_out);
    }

    /// A misspelt field must not be passed over: what it says would be lost.
    fn refuse_unknown(&mut self) {
        let unknown: Vec<&String> = self
            .object
            .keys()
            .filter(|name| !self.asked.contains(&name.as_str()))
            .collect();
        for name in unknown {
            let known = self.asked.join(", ");
            let shown = excerpt(name);
            self.problem(
                shown.trim_matches('"'),
                "",
                &format!("unknown; known are {known}"),
            );
        }
    }

    fn finish(self) -> Vec<Problem> {
        let mut problems = self.problems;
        if problems.len() > PROBLEMS_MAX {
            let more = problems.len() - PROBLEMS_MAX;
            problems.truncate(PROBLEMS_MAX);
            problems.push(Problem {
                field: String::new(),
                value: String::new(),
                way_out: format!("and {more} more problems"),
            });
        }
        problems
    }
}

#[cfg(test)]
mod tests {
    use super::*;

    const RECEIVED: Timestamp = Timestamp(1_772_366_400_000_000_000);

    fn take(verb: &str, payload: &str) -> Order {
        take_with(&OrderMessage {
            verb,
            payload: payload.as_bytes(),
            retained: false,
            reply_to: None,
        })
    }

    fn take_with(message: &OrderMessage<'_>) -> Order {
        match OrderIntake::new("works").take(message, RECEIVED) {
            Some(Input::Order(order)) => *order,
            other => panic!("no order: {other:?}"),
        }
    }

    fn problems(order: &Order) -> Vec<(&str, &str)> {
        match &order.wish {
            Wish::Unusable(problems) => problems
                .iter()
                .map(|problem| (problem.field.as_str(), problem.value.as_str()))
                .collect(),
            taken => panic!("taken: {taken:?}"),
        }
    }

    #[test]
    fn a_whole_order_is_read_to_the_bit() {
        let order = take(
            "service",
            r#"{"id":"v-7","channel":"intake/ph-1","act":"cleaned","at":"2026-03-01T10:00:00Z",
                "by":"night shift","as_found":[{"indication":7.1200000000000001,"reference":7,
                "uncertainty":0.02}],"as_left":[{"indication":-0.0,"reference":7.0}],
                "serial":"A-12","certificate":"C-114","note":"film on the glass"}"#,
        );
        assert_eq!(order.id, "v-7");
        assert_eq!(order.received, RECEIVED);
        let Wish::Service(event) = order.wish else {
            panic!("{order:?}")
        };
        assert_eq!(event.about, About::Channel("intake/ph-1".to_owned()));
        assert_eq!(event.act, Act::Cleaned);
        assert_eq!(event.at.unwrap().to_string(), "2026-03-01T10:00:00Z");
        assert_eq!(
            event.as_found,
            [CheckPoint {
                indication: 7.12,
                reference: 7.0,
                expanded_uncertainty: Some(0.02),
            }]
        );
        assert_eq!(event.as_left[0].indication.to_bits(), 0.0_f64.to_bits());
        assert_eq!(event.as_left[0].expanded_uncertainty, None);
        assert_eq!(event.serial.as_deref(), Some("A-12"));
        assert_eq!(event.certificate.as_deref(), Some("C-114"));
        assert_eq!(
            (event.by.as_str(), event.note.as_str()),
            ("night shift", "film on the glass")
        );
    }

    #[test]
    fn the_time_may_be_left_out() {
        let order = take(
            "service",
            r#"{"id":"1","reference":"lab","act":"calibrated","by":"x"}"#,
        );
        let Wish::Service(event) = order.wish else {
            panic!("{order:?}")
        };
        assert_eq!(event.at, None);
        assert_eq!(event.about, About::Reference("lab".to_owned()));
    }

    #[test]
    fn all_problems_are_told_at_once_and_the_id_is_kept() {
        let order = take(
            "service",
            r#"{"id":"v-8","chanel":"ph","act":"polished","at":"yesterday","by":7,
                "as_found":[{"indication":"7,1"},{"indication":1,"reference":2,"uncertainty":-1}],
                "as_left":3}"#,
        );
        assert_eq!(order.id, "v-8");
        let found = problems(&order);
        for expected in [
            ("channel", ""),
            ("act", "\"polished\""),
            ("by", "\"7\""),
            ("at", "\"yesterday\""),
            ("as_found[0].indication", "\"\\\"7,1\\\"\""),
            ("as_found[0].reference", ""),
            ("as_found[1].uncertainty", "\"-1\""),
            ("as_left", "\"3\""),
            ("chanel", ""),
        ] {
            assert!(found.contains(&expected), "{expected:?} not in {found:?}");
        }
        assert_eq!(found.len(), 9, "{found:?}");
    }

    #[test]
    fn what_is_no_order_at_all_is_one_problem() {
        let long = format!("{{\"id\":\"{}\"}}", "x".repeat(PAYLOAD_MAX));
        for payload in [
            "",
            "7.0",
            "[]",
            "{\"id\":",
            "{\"id\":1e999}",
            "\u{0}",
            &long,
        ] {
            let order = take("service", payload);
            assert_eq!(order.id, "", "{payload:.20}");
            assert_eq!(problems(&order).len(), 1, "{payload:.20}");
        }
        let many = format!(
            "{{{}}}",
            (0..500)
                .map(|n| format!("\"k{n}\":0"))
                .collect::<Vec<_>>()
                .join(",")
        );
        assert_eq!(problems(&take("service", &many)).len(), PROBLEMS_MAX + 1);
    }

    #[test]
    fn other_verbs_and_retained_orders_are_refused_under_their_id() {
        let good = r#"{"id":"v-9","channel":"ph","act":"cleaned","by":"x"}"#;
        let other = take("polish", good);
        assert_eq!(
            (other.id.as_str(), problems(&other)),
            ("v-9", vec![("", "\"polish\"")])
        );
        let message = OrderMessage {
            verb: "service",
            payload: good.as_bytes(),
            retained: true,
            reply_to: None,
        };
        let retained = take_with(&message);
        assert_eq!(retained.id, "v-9");
        assert_eq!(problems(&retained).len(), 1);
        let cleared = OrderMessage {
            payload: b"",
            ..message
        };
        assert_eq!(OrderIntake::new("works").take(&cleared, RECEIVED), None);
    }

    #[test]
    fn an_answer_never_goes_where_it_would_pass_for_something_else() {
        for (topic, stands) in [
            ("tool/answers/7", true),
            ("holdtrue/works/answer/7", true),
            ("holdtrue/other/order/service", true),
            ("holdtrue/works/order/service", false),
            ("holdtrue/works/correction/ph", false),
            ("holdtrue/works/answers", false),
            ("a/+/b", false),
            ("a/#", false),
            ("$SYS/x", false),
            ("", false),
        ] {
            let reply = ReplyTo {
                topic: topic.to_owned(),
                correlation: Some(vec![0, 255]),
            };
            let order = take_with(&OrderMessage {
                verb: "service",
                payload: b"{}",
                retained: false,
                reply_to: Some(&reply),
            });
            assert_eq!(order.reply_to.is_some(), stands, "{topic}");
        }
    }

    /// `null` counts as nothing, so that somebody must still say what was served.
    #[test]
    fn an_order_about_null_misses_its_channel() {
        let order = take(
            "service",
            r#"{"id":"v-7","channel":null,"act":"cleaned","by":"night shift"}"#,
        );
        assert_eq!(problems(&order), [("channel", "")]);
    }

    #[test]
    fn a_quarantine_and_its_release_are_read() {
        let order = take(
            "quarantine",
            r#"{"id":"q-1","reference":"lab","from":"2026-03-01","by":"M. Ito","note":"spoilt"}"#,
        );
        let expected = Wish::Quarantine(Quarantine {
            by: "M. Ito".to_owned(),
            about: About::Reference("lab".to_owned()),
            interval: Interval {
                from: Timestamp(1_772_323_200_000_000_000),
                to: None,
            },
            note: "spoilt".to_owned(),
        });
        assert_eq!((order.id.as_str(), order.wish), ("q-1", expected));
        let order = take(
            "release",
            r#"{"id":"r-1","quarantine":"q-1","by":"M. Ito"}"#,
        );
        let expected = Wish::Release(Release {
            by: "M. Ito".to_owned(),
            quarantine: "q-1".to_owned(),
            note: String::new(),
        });
        assert_eq!((order.id.as_str(), order.wish), ("r-1", expected));
    }

    #[test]
    fn everything_wrong_with_a_quarantine_is_told() {
        let order = take(
            "quarantine",
            r#"{"id":"q-1","reference":"lab","influence":"t","to":"tomorrow","at":"x"}"#,
        );
        let fields: Vec<&str> = problems(&order).iter().map(|(field, _)| *field).collect();
        assert_eq!(fields, ["channel", "by", "from", "to", "at"]);
        let order = take("release", r#"{"id":"r-1","by":"M. Ito"}"#);
        assert_eq!(problems(&order), [("quarantine", "")]);
    }
}
