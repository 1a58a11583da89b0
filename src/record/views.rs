//! What people read in a record: views with names instead of numbers, and times as text.

/// A view of the record.
pub struct View {
    /// Its name in the file.
    pub name: &'static str,
    /// What it shows, for people.
    pub shows: &'static str,
    definition: &'static str,
}

/// A time in nanoseconds as text. Integer division first: a float would round the milliseconds.
macro_rules! utc {
    ($column:literal) => {
        concat!(
            "strftime('%Y-%m-%dT%H:%M:%S', ",
            $column,
            " / 1000000000, 'unixepoch') || printf('.%09dZ', ",
            $column,
            " % 1000000000)"
        )
    };
}

/// All views. Each begins with the position by which its rows are ordered.
pub const VIEWS: &[View] = &[
    View {
        name: "readings",
        shows: "every value that came in, used or not",
        definition: concat!(
            "SELECT position, kind, name, unit, ",
            utc!("phenomenon"),
            " AS sampled, ",
            utc!("received"),
            " AS received, value, sequence, coalesce(excluded, 0) AS excluded
             FROM raw_readings JOIN sources ON sources.number = source"
        ),
    },
    View {
        name: "pairs",
        shows: "what became of each pair of an indication and a reference value",
        definition: concat!(
            "SELECT position, input, name AS channel, ",
            utc!("json_extract(body, '$.Pair.phenomenon')"),
            " AS sampled, json_extract(body, '$.Pair.indication') AS indication,
             json_extract(body, '$.Pair.reference') AS reference_value,
             json_extract(body, '$.Pair.indication')
             - json_extract(body, '$.Pair.reference') AS error,
             unit,
             json_extract(body, '$.Pair.flag') AS flag,
             json_extract(body, '$.Pair.rejected.reason') AS kept_out_by,
             json_extract(body, '$.Pair.rejected.value') AS tested_value,
             json_extract(body, '$.Pair.rejected.threshold') AS threshold
             FROM outputs LEFT JOIN sources ON sources.number = subject
             WHERE outputs.kind = 'pair'"
        ),
    },
    View {
        name: "corrections",
        shows: "every correction that came into force",
        definition: concat!(
            "SELECT position, input, name AS channel,
             json_extract(body, '$.Correction.issue_number') AS issue_number, ",
            utc!("json_extract(body, '$.Correction.issued')"),
            " AS issued, ",
            utc!("json_extract(body, '$.Correction.valid_until')"),
            " AS valid_until, json_extract(body, '$.Correction.rung') AS rung,
             json_extract(body, '$.Correction.degree') AS degree,
             json_extract(body, '$.Correction.correction') AS correction,
             json_extract(body, '$.Correction.standard_uncertainty') AS standard_uncertainty,
             json_extract(body, '$.Correction.expanded_uncertainty') AS expanded_uncertainty, unit,
             json_extract(body, '$.Correction.suppressed') AS suppressed,
             json_extract(body, '$.Correction.zone') AS zone, ",
            utc!("json_extract(body, '$.Correction.window.from')"),
            " AS window_from, ",
            utc!("json_extract(body, '$.Correction.window.to')"),
            " AS window_to, json_extract(body, '$.Correction.window.pairs') AS pairs,
             json_extract(body, '$.Correction.stretch') AS stretch, body
             FROM outputs LEFT JOIN sources ON sources.number = subject
             WHERE outputs.kind = 'correction'"
        ),
    },
    View {
        name: "withdrawals",
        shows: "every correction that was taken back, and why",
        definition: concat!(
            "SELECT position, input, name AS channel, ",
            utc!("json_extract(body, '$.Withdrawn.at')"),
            " AS at, json_extract(body, '$.Withdrawn.why') AS why
             FROM outputs LEFT JOIN sources ON sources.number = subject
             WHERE outputs.kind = 'withdrawn'"
        ),
    },
    View {
        name: "alarms",
        shows: "every change of an alarm",
        definition: concat!(
            "SELECT position, input, coalesce(sources.kind, 'node') AS subject_kind,
             name AS subject,
             json_extract(body, '$.Alarm.kind') AS alarm,
             json_extract(body, '$.Alarm.state') AS state, ",
            utc!("json_extract(body, '$.Alarm.at')"),
            " AS at, json_extract(body, '$.Alarm.value') AS value,
             json_extract(body, '$.Alarm.limit') AS alarm_limit,
             json_extract(body, '$.Alarm.unit') AS unit,
             json_extract(body, '$.Alarm.text') AS text
             FROM outputs LEFT JOIN sources ON sources.number = subject
             WHERE outputs.kind = 'alarm'"
        ),
    },
    View {
        name: "degrees",
        shows: "every change of the announced model, with its evidence",
        definition: concat!(
            "SELECT position, input, name AS channel, ",
            utc!("json_extract(body, '$.Degree.at')"),
            " AS at, body FROM outputs LEFT JOIN sources ON sources.number = subject
             WHERE outputs.kind = 'degree'"
        ),
    },
    View {
        name: "steps",
        shows: "every step of a sensor",
        definition: concat!(
            "SELECT position, input, name AS channel, ",
            utc!("json_extract(body, '$.Step.at')"),
            " AS at, body FROM outputs LEFT JOIN sources ON sources.number = subject
             WHERE outputs.kind = 'step'"
        ),
    },
    View {
        name: "orders",
        shows: "what people told the daemon, and its answers",
        definition: concat!(
            "SELECT inputs.position, ",
            utc!("inputs.received"),
            " AS received, json_extract(inputs.body, '$.Order.id') AS id,
             coalesce(json_extract(inputs.body, '$.Order.wish.Service.by'),
                      json_extract(inputs.body, '$.Order.wish.Quarantine.by'),
                      json_extract(inputs.body, '$.Order.wish.Release.by')) AS told_by,
             json_extract(inputs.body, '$.Order.wish') AS wish,
             json_extract(outputs.body, '$.Answer.accepted') AS accepted,
             json_extract(outputs.body, '$.Answer.text') AS answer
             FROM inputs LEFT JOIN outputs
             ON outputs.input = inputs.position AND outputs.kind = 'answer'
             WHERE inputs.kind = 'order'"
        ),
    },
    View {
        name: "configurations",
        shows: "every configuration, from which input on it was in force",
        definition: "SELECT (SELECT first_input FROM day) AS position,
             json_extract(setup, '$.fingerprint') AS sha256,
             json_array_length(setup, '$.channels') AS channels, setup FROM day
             WHERE json_array_length(setup, '$.channels') > 0
             UNION ALL
             SELECT position, json_extract(body, '$.Setup.fingerprint'),
             json_array_length(body, '$.Setup.channels'), json_extract(body, '$.Setup')
             FROM inputs WHERE kind = 'setup'",
    },
    View {
        name: "published",
        shows: "every document in the order of issue, and what became of it",
        definition: concat!(
            "SELECT documents.number AS position, input, topic, retain, ",
            utc!("expires"),
            " AS expires, CAST(payload AS TEXT) AS payload,
             coalesce(how, 'waiting') AS settled
             FROM documents LEFT JOIN settled ON settled.number = documents.number"
        ),
    },
    View {
        name: "impacts",
        shows: "the corrections that a quarantine touches",
        definition: "SELECT documents.number AS position,
             json_extract(CAST(payload AS TEXT), '$.quarantine') AS quarantine,
             json_extract(CAST(payload AS TEXT), '$.channel') AS channel,
             json_extract(value, '$.issue_number') AS issue_number,
             json_extract(value, '$.issued') AS issued,
             json_extract(value, '$.valid_until') AS valid_until,
             json_extract(value, '$.correction') AS correction,
             json_extract(value, '$.expanded_uncertainty') AS expanded_uncertainty,
             json_extract(CAST(payload AS TEXT), '$.unit') AS unit,
             json_extract(value, '$.window_from') AS window_from,
             json_extract(value, '$.window_to') AS window_to
             FROM documents, json_each(CAST(payload AS TEXT), '$.corrections')
             WHERE topic LIKE 'holdtrue/%/impact/%' AND length(payload) > 0",
    },
    View {
        name: "notices",
        shows: "what a person should be able to read about, refusals among it",
        definition: concat!(
            "SELECT position, input, ",
            utc!("json_extract(body, '$.Notice.at')"),
            " AS at, json_extract(body, '$.Notice.code') AS code,
             json_extract(body, '$.Notice.text') AS text,
             json_extract(body, '$.Notice.held_back') AS held_back
             FROM outputs WHERE outputs.kind = 'notice'"
        ),
    },
];

/// The statements that make all views.
pub(super) fn statements() -> String {
    use std::fmt::Write;
    VIEWS.iter().fold(String::new(), |mut text, view| {
        let _ = writeln!(text, "CREATE VIEW {} AS {};", view.name, view.definition);
        text
    })
}
