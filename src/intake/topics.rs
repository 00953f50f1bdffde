//! Topics: which filters to subscribe, and which banks a topic belongs to.
//!
//! Follows section 4.7 of MQTT 5.0 (OASIS Standard, 7 March 2019): `+` stands for exactly one level,
//! also an empty one; `#` for the level before it and everything below; a topic that starts with `$` is
//! never matched by a wildcard in the first level. What must hold: every topic that a feed's template
//! matches is covered by a subscription, and no filter is subscribed that another one covers, because
//! a broker may deliver a message once for each subscription it matches (§3.3.4).
//! Deliberately absent: checking templates; the settings do.

use crate::model::BankIx;
use crate::settings::{Feed, TopicTemplate};

/// The feeds' topics.
#[derive(Clone, Debug)]
pub struct Topics {
    filters: Vec<String>,
    routes: Vec<Route>,
}

/// Which topics belong to a bank.
#[derive(Clone, Debug)]
struct Route {
    bank: BankIx,
    pattern: Pattern,
    /// What stands for the source, where no message names one.
    stand_in: Option<&'static str>,
}

/// A template taken apart.
#[derive(Clone, Debug, PartialEq, Eq)]
struct Pattern {
    levels: Vec<Level>,
    source_level: Option<usize>,
}

#[derive(Clone, Debug, PartialEq, Eq)]
enum Level {
    Exactly(String),
    /// `+` or `{source}`.
    AnyOne,
    /// `#`.
    Rest,
}

impl Topics {
    /// The topics of these feeds.
    pub fn new<'f>(feeds: impl IntoIterator<Item = &'f Feed>) -> Self {
        let route = |feed: &Feed| Route {
            bank: feed.bank,
            pattern: Pattern::new(&feed.topic),
            stand_in: feed.told_by.stand_in(),
        };
        let routes: Vec<_> = feeds.into_iter().map(route).collect();
        let mut kept: Vec<&Pattern> = Vec::new();
        for pattern in routes.iter().map(|route| &route.pattern) {
            if !kept.iter().any(|other| other.covers(pattern)) {
                kept.retain(|other| !pattern.covers(other));
                kept.push(pattern);
            }
        }
        let filters = kept.into_iter().map(Pattern::filter).collect();
        Self { filters, routes }
    }

    /// The filters to subscribe, in the order of the configuration.
    pub fn filters(&self) -> &[String] {
        &self.filters
    }

    /// The banks that a topic belongs to, each with the source that the topic names, or what stands for it.
    pub fn route<'t>(
        &self,
        topic: &'t str,
    ) -> impl Iterator<Item = (BankIx, Option<&'t str>)> + use<'_, 't> {
        self.routes.iter().filter_map(move |route| {
            let source = route.pattern.matches(topic)?;
            Some((route.bank, source.or(route.stand_in)))
        })
    }
}

impl Pattern {
    fn new(template: &TopicTemplate) -> Self {
        let level = |(at, written): (usize, &String)| match written.as_str() {
            _ if template.source_level == Some(at) => Level::AnyOne,
            "+" => Level::AnyOne,
            "#" => Level::Rest,
            exactly => Level::Exactly(exactly.to_owned()),
        };
        Self {
            levels: template.levels.iter().enumerate().map(level).collect(),
            source_level: template.source_level,
        }
    }

    /// As a subscription writes it.
    fn filter(&self) -> String {
        let levels: Vec<&str> = self
            .levels
            .iter()
            .map(|level| match level {
                Level::Exactly(text) => text,
                Level::AnyOne => "+",
                Level::Rest => "#",
            })
            .collect();
        levels.join("/")
    }

    /// Whether the topic matches, and the source it names.
    fn matches<'t>(&self, topic: &'t str) -> Option<Option<&'t str>> {
        if topic.is_empty() || (topic.starts_with('$') && !self.starts_exactly()) {
            return None;
        }
        let mut source = None;
        let mut levels = topic.split('/');
        for (at, level) in self.levels.iter().enumerate() {
            match (level, levels.next()) {
                // The parent level is part of `#`: nothing left is a match too.
                (Level::Rest, _) => return Some(source),
                (Level::AnyOne, Some(text)) => {
                    if self.source_level == Some(at) {
                        source = Some(text);
                    }
                }
                (Level::Exactly(expected), Some(text)) if expected == text => {}
                _ => return None,
            }
        }
        levels.next().is_none().then_some(source)
    }

    fn starts_exactly(&self) -> bool {
        matches!(self.levels.first(), Some(Level::Exactly(_)))
    }

    /// Whether every topic that `other` matches is matched by this one.
    fn covers(&self, other: &Self) -> bool {
        let special =
            matches!(other.levels.first(), Some(Level::Exactly(text)) if text.starts_with('$'));
        if special && !self.starts_exactly() {
            return false;
        }
        let mut others = other.levels.iter();
        for level in &self.levels {
            match (level, others.next()) {
                (Level::Rest, _) => return true,
                (Level::AnyOne, Some(Level::AnyOne | Level::Exactly(_))) => {}
                (Level::Exactly(a), Some(Level::Exactly(b))) if a == b => {}
                _ => return false,
            }
        }
        others.next().is_none()
    }
}

#[cfg(test)]
mod tests {
    use super::*;
    use crate::intake::fixture::{self, template};
    use crate::settings::{PayloadForm, ToldBy};

    fn topics(templates: &[&str]) -> Topics {
        let number = |&text| (text, PayloadForm::Number);
        Topics::new(&fixture::feeds(templates.iter().map(number)))
    }

    fn matches(filter: &str, topic: &str) -> bool {
        topics(&[filter]).route(topic).next().is_some()
    }

    /// The examples of MQTT 5.0, sections 4.7.1.2, 4.7.1.3, 4.7.2 and 4.7.3.
    #[test]
    fn the_examples_of_the_standard() {
        for (filter, topic, expected) in [
            ("sport/tennis/player1/#", "sport/tennis/player1", true),
            (
                "sport/tennis/player1/#",
                "sport/tennis/player1/ranking",
                true,
            ),
            (
                "sport/tennis/player1/#",
                "sport/tennis/player1/score/wimbledon",
                true,
            ),
            ("sport/#", "sport", true),
            ("#", "sport/tennis", true),
            ("sport/tennis/+", "sport/tennis/player1", true),
            ("sport/tennis/+", "sport/tennis/player2", true),
            ("sport/tennis/+", "sport/tennis/player1/ranking", false),
            ("sport/+", "sport", false),
            ("sport/+", "sport/", true),
            ("+/tennis/#", "x/tennis/y/z", true),
            ("sport/+/player1", "sport/tennis/player1", true),
            ("+/+", "/finance", true),
            ("/+", "/finance", true),
            ("+", "/finance", false),
            ("#", "$SYS/broker/load", false),
            ("+/monitor/Clients", "$SYS/monitor/Clients", false),
            ("$SYS/#", "$SYS/broker/load", true),
            ("$SYS/monitor/+", "$SYS/monitor/Clients", true),
            ("ACCOUNTS", "Accounts", false),
            ("/finance", "finance", false),
        ] {
            assert_eq!(matches(filter, topic), expected, "{filter} {topic}");
        }
    }

    #[test]
    fn the_source_is_one_whole_level() {
        let topics = topics(&["line/{source}/net", "line/+/net", "line/#"]);
        let got: Vec<_> = topics.route("line/07/net").collect();
        let (a, b, c) = (BankIx(0), BankIx(1), BankIx(2));
        assert_eq!(got, [(a, Some("07")), (b, None), (c, None)]);
        assert_eq!(topics.route("line//net").next(), Some((a, Some(""))));
        assert_eq!(topics.route("other/07/net").count(), 0);
        assert_eq!(topics.route("").count(), 0);
    }

    #[test]
    fn where_the_time_tells_the_source_something_stands_for_it() {
        let mut feeds = fixture::feeds([("line/+/net", PayloadForm::Number)]);
        feeds[0].told_by = ToldBy::Time;
        let topics = Topics::new(&feeds);
        let got = topics.route("line/07/net").next();
        assert_eq!(got, Some((BankIx(0), Some("all shifts"))));
    }

    #[test]
    fn a_filter_that_another_covers_is_not_subscribed() {
        for (templates, filters) in [
            (&["a/{source}/b", "a/+/b"][..], &["a/+/b"][..]),
            (&["a/1/b", "a/+/b", "a/2/b"], &["a/+/b"]),
            (&["a/+/b", "a/#"], &["a/#"]),
            (&["a/#", "a"], &["a/#"]),
            (&["a/+", "a/#/"], &["a/#/"]),
            (&["a/+", "+/b"], &["a/+", "+/b"]),
            (&["#", "$SYS/x"], &["#", "$SYS/x"]),
            (&["+/x", "$SYS/x"], &["+/x", "$SYS/x"]),
        ] {
            assert_eq!(topics(templates).filters(), filters, "{templates:?}");
        }
    }

    proptest::proptest! {
        #[test]
        fn covering_is_what_it_says(a in "[ab$+]{0,1}(/[ab+]){0,3}(/#)?", b in "[ab$+]{0,1}(/[ab+]){0,3}(/#)?", topic in "[ab$]{0,1}(/[abc]?){0,4}") {
            let covers = Pattern::new(&template(&a)).covers(&Pattern::new(&template(&b)));
            if covers && matches(&b, &topic) {
                proptest::prop_assert!(matches(&a, &topic), "{} {} {}", a, b, topic);
            }
        }

        #[test]
        fn no_topic_panics(filter in "(\\PC|/){0,12}", topic in "(\\PC|/){0,20}") {
            let _ = matches(&filter, &topic);
        }
    }
}
