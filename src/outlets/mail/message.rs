//! What a mail looks like: plain text first, the picture beside it, one thread for each notice.

use std::time::{Duration, SystemTime, UNIX_EPOCH};

use lettre::Address;
use lettre::address::AddressError;
use lettre::message::header::{ContentType, Header, HeaderName, HeaderValue};
use lettre::message::{Attachment, Mailbox as LettreMailbox, MultiPart, SinglePart};

use crate::model::{Time, topic_name};
use crate::notice::Notice;
use crate::outlets::letter::{Letter, Purpose};
use crate::settings::{Mail, Mailbox};

/// Why a message cannot be written.
#[derive(Debug, thiserror::Error)]
pub enum ComposeError {
    /// An address is none.
    #[error("\"{address}\" is no address: {source}")]
    Address {
        /// The text.
        address: String,
        /// Why.
        source: AddressError,
    },
    /// The parts do not make a message.
    #[error(transparent)]
    Message(#[from] lettre::error::Error),
}

/// Says that no person wrote this, so that no machine answers (RFC 3834).
#[derive(Clone)]
struct AutoSubmitted;

impl Header for AutoSubmitted {
    fn name() -> HeaderName {
        HeaderName::new_from_ascii_str("Auto-Submitted")
    }

    fn parse(_: &str) -> Result<Self, Box<dyn std::error::Error + Send + Sync>> {
        Ok(Self)
    }

    fn display(&self) -> HeaderValue {
        HeaderValue::new(Self::name(), "auto-generated".to_owned())
    }
}

/// The message of a letter. A repeat has the same Message-ID.
///
/// # Errors
/// When an address or the whole is not as mail wants it.
pub fn compose(
    mail: &Mail,
    letter: &Letter,
    picture: Option<String>,
    now: Time,
) -> Result<lettre::Message, ComposeError> {
    let domain = mail.from.address.rsplit_once('@').map_or("", |(_, d)| d);
    let ours = |id: String| format!("<{id}@{domain}>");
    let mut builder = lettre::Message::builder()
        .from(mailbox(&mail.from)?)
        .date(system_time(now))
        .subject(letter.subject())
        .message_id(Some(ours(format!("{}.evenrow", letter.id()))))
        .header(AutoSubmitted);
    for to in &mail.to {
        builder = builder.to(mailbox(to)?);
    }
    if letter.purpose == Purpose::Notice {
        // All mails about one notice refer to one that was never sent, which makes them a thread
        // whichever of them a reader has (RFC 5256, REFERENCES).
        let root = ours(thread(&letter.first().notice));
        builder = builder.in_reply_to(root.clone()).references(root);
    }
    let text = SinglePart::plain(letter.text());
    let Some(svg) = picture.filter(|_| letter.purpose == Purpose::Notice) else {
        return Ok(builder.singlepart(text)?);
    };
    let name = format!("{}.svg", letter.first().notice.id);
    let picture = Attachment::new(name).body(svg, svg_type());
    let parts = MultiPart::mixed().singlepart(text).singlepart(picture);
    Ok(builder.multipart(parts)?)
}

/// What the mails of a notice refer to: letters, digits, dashes and full stops.
fn thread(notice: &Notice) -> String {
    let safe = |c: char| match c {
        c if c.is_ascii_alphanumeric() || c == '-' || c == '.' => c,
        _ => '-',
    };
    let id: String = notice.id.chars().map(safe).collect();
    let plant: String = topic_name(&notice.plant).chars().map(safe).collect();
    format!("{id}.{plant}.evenrow")
}

fn mailbox(one: &Mailbox) -> Result<LettreMailbox, ComposeError> {
    let address: Address = one
        .address
        .parse()
        .map_err(|source| ComposeError::Address {
            address: one.address.clone(),
            source,
        })?;
    Ok(LettreMailbox::new(one.name.clone(), address))
}

fn svg_type() -> ContentType {
    // A fixed, well-formed type; plain text would show the picture as its source.
    ContentType::parse("image/svg+xml").unwrap_or(ContentType::TEXT_PLAIN)
}

fn system_time(now: Time) -> SystemTime {
    UNIX_EPOCH + Duration::from_micros(u64::try_from(now.us()).unwrap_or(0))
}

#[cfg(test)]
mod tests;
