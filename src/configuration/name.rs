//! Names of nodes, channels and references, topics, and wildcard filters.

/// Longest topic in MQTT, bytes.
const TOPIC_MAX: usize = 65_535;
/// Longest name, so that every topic made from it stays far below the limit.
const NAME_MAX: usize = 200;

/// Checks a name made of levels, `intake/ph-1`.
///
/// # Errors
/// What is wrong, and what is allowed.
pub(super) fn check_name(name: &str) -> Result<(), String> {
    if name.is_empty() || name.len() > NAME_MAX {
        return Err(format!("\"{name}\": a name has 1 to {NAME_MAX} bytes"));
    }
    if name.split('/').any(str::is_empty) {
        return Err(format!(
            "\"{name}\" has an empty level; write a/b, without // and outer /"
        ));
    }
    let allowed =
        |letter: char| letter.is_alphanumeric() || matches!(letter, '-' | '_' | '.' | '/');
    match name.chars().find(|letter| !allowed(*letter)) {
        Some(letter) => Err(format!(
            "\"{name}\" contains {letter:?}; allowed are letters, digits, - _ . and / for levels"
        )),
        None => Ok(()),
    }
}

/// Checks a node's name: one level.
///
/// # Errors
/// What is wrong, and what is allowed.
pub(super) fn check_node_name(name: &str) -> Result<(), String> {
    check_name(name)?;
    if name.contains('/') {
        return Err(format!(
            "\"{name}\": a node's name is one level of its topics, without /"
        ));
    }
    Ok(())
}

/// Checks a topic that is read: no wildcards (MQTT 5.0 section 4.7, from memory).
///
/// # Errors
/// What is wrong, and the way out.
pub(super) fn check_topic(topic: &str) -> Result<(), String> {
    check_bytes(topic)?;
    if topic.contains(['+', '#']) {
        return Err(format!(
            "\"{topic}\" has a wildcard; name the one topic here, \
             and put the wildcard into [broker] subscribe"
        ));
    }
    Ok(())
}

/// Checks a filter that is subscribed to (MQTT 5.0 section 4.7.1, from memory).
///
/// # Errors
/// What is wrong, and the way out.
pub(super) fn check_filter(filter: &str) -> Result<(), String> {
    check_bytes(filter)?;
    if filter.starts_with("$share/") {
        return Err(format!(
            "\"{filter}\": a shared subscription would give each daemon a part of the readings; \
             write the filter without $share"
        ));
    }
    let levels: Vec<&str> = filter.split('/').collect();
    for (index, level) in levels.iter().enumerate() {
        if level.contains(['+', '#']) && level.len() > 1 {
            return Err(format!(
                "\"{filter}\": a wildcard must be a whole level, as in a/+/b"
            ));
        }
        if *level == "#" && index + 1 < levels.len() {
            return Err(format!("\"{filter}\": # must be the last level"));
        }
    }
    Ok(())
}

/// Whether a filter matches a topic (MQTT 5.0 section 4.7, from memory): `+` is one level, `#` all
/// further ones with the level above; neither matches a first level that begins with `$`.
pub(super) fn covers(filter: &str, topic: &str) -> bool {
    if topic.starts_with('$') && filter.starts_with(['+', '#']) {
        return false;
    }
    let mut levels = topic.split('/');
    for wanted in filter.split('/') {
        match (wanted, levels.next()) {
            ("#", _) => return true,
            ("+", Some(_)) => {}
            (wanted, Some(level)) if wanted == level => {}
            _ => return false,
        }
    }
    levels.next().is_none()
}

/// Whether a filter can match some topic below `prefix` (which ends in `/`).
pub(super) fn reaches_below(filter: &str, prefix: &str) -> bool {
    let mut wanted = filter.split('/');
    for level in prefix.trim_end_matches('/').split('/') {
        match wanted.next() {
            Some("#") => return true,
            Some(part) if part == "+" || part == level => {}
            _ => return false,
        }
    }
    wanted.next().is_some()
}

fn check_bytes(topic: &str) -> Result<(), String> {
    if topic.is_empty() || topic.len() > TOPIC_MAX {
        return Err(format!("a topic has 1 to {TOPIC_MAX} bytes"));
    }
    if topic.contains(char::is_control) {
        return Err(format!("{topic:?} contains a control character"));
    }
    Ok(())
}

#[cfg(test)]
mod tests {
    use super::*;

    #[test]
    fn names_are_levels_of_plain_letters() {
        for name in ["ph", "intake/ph-1", "a/b/c_d.e", "Zulauf/Trübung"] {
            assert_eq!(check_name(name), Ok(()), "{name}");
        }
        for name in [
            "",
            "/a",
            "a/",
            "a//b",
            "a b",
            "a+",
            "#",
            "a\n",
            "a\"b",
            &"x".repeat(201),
        ] {
            assert!(check_name(name).is_err(), "{name}");
        }
        assert!(check_node_name("north-works").is_ok() && check_node_name("north/works").is_err());
    }

    #[test]
    fn filters_and_topics_follow_the_standard() {
        for filter in ["a/b", "#", "+", "a/+/b", "a/#", "+/+", "$SYS/#", "/", "a b"] {
            assert_eq!(check_filter(filter), Ok(()), "{filter}");
        }
        for filter in ["", "a/#/b", "a+", "a/b#", "$share/x/a", "a\0b"] {
            assert!(check_filter(filter).is_err(), "{filter}");
        }
        assert!(check_topic("a/b").is_ok() && check_topic("a/+").is_err());
    }

    /// Examples after MQTT 5.0 section 4.7 (from memory).
    #[test]
    fn filters_cover_topics() {
        for (filter, topic) in [
            ("sport/tennis/player1/#", "sport/tennis/player1"),
            (
                "sport/tennis/player1/#",
                "sport/tennis/player1/score/wimbledon",
            ),
            ("#", "a/b"),
            ("+/+", "/finance"),
            ("/+", "/finance"),
            ("sport/+", "sport/"),
            ("$SYS/#", "$SYS/a"),
            ("a/b", "a/b"),
        ] {
            assert!(covers(filter, topic), "{filter} {topic}");
        }
        for (filter, topic) in [
            ("sport/+", "sport"),
            ("+", "/finance"),
            ("sport/tennis/+", "sport/tennis/player1/ranking"),
            ("#", "$SYS/a"),
            ("+/a", "$SYS/a"),
            ("a", "A"),
            ("a/b", "a/b/c"),
        ] {
            assert!(!covers(filter, topic), "{filter} {topic}");
        }
    }

    #[test]
    fn filters_that_reach_our_own_topics_are_seen() {
        for filter in [
            "#",
            "+/#",
            "holdtrue/#",
            "holdtrue/+/state",
            "holdtrue/n/#",
            "+/n/alarm/#",
        ] {
            assert!(reaches_below(filter, "holdtrue/n/"), "{filter}");
        }
        for filter in [
            "works/#",
            "holdtrue",
            "holdtrue/m/#",
            "+",
            "holdtrue/n",
            "+/+",
        ] {
            assert!(!reaches_below(filter, "holdtrue/n/"), "{filter}");
        }
    }
}
