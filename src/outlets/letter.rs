//! What an outlet sends at once: one notice, several that were held back, or a test.

use crate::model::Name;
use crate::notice::{Delivery, MOST_SUBJECT};

use super::cloud_event;

/// Something to send, at least one delivery.
#[derive(Clone, Debug, PartialEq)]
pub struct Letter {
    /// What it is.
    pub purpose: Purpose,
    first: Delivery,
    more: Vec<Delivery>,
}

/// What a letter is.
#[derive(Clone, Copy, Debug, PartialEq, Eq)]
pub enum Purpose {
    /// One notice.
    Notice,
    /// Several that were held back by `at_most`.
    Digest,
    /// One that only tries the way.
    Test,
}

impl Letter {
    /// A single notice.
    pub fn notice(delivery: Delivery) -> Self {
        Self {
            purpose: Purpose::Notice,
            first: delivery,
            more: Vec::new(),
        }
    }

    /// A notice that only tries the way.
    pub fn test(delivery: Delivery) -> Self {
        Self {
            purpose: Purpose::Test,
            ..Self::notice(delivery)
        }
    }

    /// Several, in the order of their numbers; a single one stays a notice, and none is no letter.
    pub fn digest(mut all: Vec<Delivery>) -> Option<Self> {
        all.sort_by_key(|d| d.number);
        let mut all = all.into_iter();
        let mut letter = Self::notice(all.next()?);
        letter.more = all.collect();
        if !letter.more.is_empty() {
            letter.purpose = Purpose::Digest;
        }
        Some(letter)
    }

    /// The first delivery.
    pub fn first(&self) -> &Delivery {
        &self.first
    }

    /// The newest delivery.
    pub fn last(&self) -> &Delivery {
        self.more.last().unwrap_or(&self.first)
    }

    /// How many deliveries it holds.
    pub fn count(&self) -> usize {
        1 + self.more.len()
    }

    /// Every delivery, oldest first.
    pub fn all(&self) -> impl Iterator<Item = &Delivery> {
        std::iter::once(&self.first).chain(&self.more)
    }

    /// Names this content: the same for a repeat and for nothing else of this plant. Made of letters,
    /// digits and dashes, so that it can stand in headers and before a full stop.
    pub fn id(&self) -> String {
        let (first, last) = (self.first.number, self.last().number);
        match self.purpose {
            Purpose::Notice => format!("notice-{first}"),
            Purpose::Test => format!("test-{first}"),
            Purpose::Digest => format!("digest-{first}-{last}-{}", self.count()),
        }
    }

    /// The event (CloudEvents) for programs.
    pub fn event(&self) -> Vec<u8> {
        match self.purpose {
            Purpose::Notice => cloud_event::encode(&self.first),
            Purpose::Test => cloud_event::encode_test(&self.first),
            Purpose::Digest => {
                let all: Vec<Delivery> = self.all().cloned().collect();
                cloud_event::encode_digest(self.id(), &all, self.last())
            }
        }
    }

    /// One line for people, at most [`MOST_SUBJECT`] characters.
    pub fn subject(&self) -> String {
        let whole = match self.purpose {
            Purpose::Notice | Purpose::Test => self.first.notice.subject.clone(),
            Purpose::Digest => {
                format!("{}: {} notices together", self.plant(), self.count())
            }
        };
        whole.chars().take(MOST_SUBJECT).collect()
    }

    /// The whole text for people.
    pub fn text(&self) -> String {
        if self.more.is_empty() {
            return self.first.notice.text.clone();
        }
        let one = |d: &Delivery| {
            let n = &d.notice;
            format!("{} ({})\n{}", n.subject, n.state.words(), n.text)
        };
        let all: Vec<String> = self.all().map(one).collect();
        let count = self.count();
        let head = format!("{count} notices were held back and come together, oldest first.");
        format!("{head}\n\n{}", all.join("\n\n"))
    }

    /// The plant's name.
    pub fn plant(&self) -> &Name {
        &self.first.notice.plant
    }
}

#[cfg(test)]
mod tests {
    use super::*;
    use crate::notice::State;
    use crate::outlets::queue::tests::delivery;

    #[test]
    fn a_digest_is_named_by_what_it_holds_and_reads_in_order() {
        let one = |number| delivery(number, "a", State::Unacknowledged);
        let digest = Letter::digest(vec![one(9), one(7), one(8)]).expect("not empty");
        assert_eq!(digest.id(), "digest-7-9-3");
        let numbers: Vec<u64> = digest.all().map(|d| d.number).collect();
        assert_eq!(numbers, [7, 8, 9]);
        assert_eq!(digest.subject(), "Quayside: 3 notices together");
        assert_eq!(digest.text().matches("Source 07 is low.").count(), 3);
        assert_eq!(Letter::digest(vec![one(7)]), Some(Letter::notice(one(7))));
        assert_eq!(Letter::digest(Vec::new()), None);
    }

    #[test]
    fn a_long_name_leaves_the_subject_short() {
        let mut long = delivery(7, "a", State::Unacknowledged);
        let notice = std::sync::Arc::make_mut(&mut long.notice);
        notice.plant = "ä".repeat(100).into();
        let digest = Letter::digest(vec![long.clone(), long]).expect("not empty");
        assert_eq!(digest.subject().chars().count(), MOST_SUBJECT);
    }
}
