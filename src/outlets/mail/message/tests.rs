//! Mails as they travel.

use super::*;
use crate::notice::State;
use crate::outlets::queue::tests::delivery;
use crate::settings::Encryption;

fn mail() -> Mail {
    let mailbox = |name: Option<&str>, address: &str| Mailbox {
        name: name.map(str::to_owned),
        address: address.to_owned(),
    };
    Mail {
        host: "127.0.0.1".to_owned(),
        port: 25,
        encryption: Encryption::InClear,
        user: None,
        password_file: None,
        ca_file: None,
        from: mailbox(Some("evenrow Küste"), "evenrow@quayside.example"),
        to: vec![
            mailbox(Some("Nachtwache Süd"), "night@quayside.example"),
            mailbox(None, "desk@quayside.example"),
        ],
    }
}

fn written(letter: &Letter, picture: Option<&str>) -> String {
    let now = Time::parse_rfc3339("2026-01-07T08:00:00Z").expect("a time");
    let message = compose(&mail(), letter, picture.map(str::to_owned), now).expect("a mail");
    String::from_utf8(message.formatted()).expect("ASCII")
}

#[track_caller]
fn assert_has(mail: &str, lines: &[&str]) {
    for line in lines {
        assert!(mail.contains(line), "{line:?} is not in\n{mail}");
    }
    assert!(mail.is_ascii(), "{mail}");
}

#[test]
fn a_mail_is_plain_text_first_and_belongs_to_its_notices_thread() {
    let letter = Letter::notice(delivery(7, "filler 2-2026-1", State::Unacknowledged));
    let mail = written(&letter, Some("<svg/>"));
    assert_has(
        &mail,
        &[
            "Date: Wed, 07 Jan 2026 08:00:00 +0000\r\n",
            "Subject: filler 2: 07 low by 1.3 g\r\n",
            "Auto-Submitted: auto-generated\r\n",
            "Message-ID: <notice-7.evenrow@quayside.example>\r\n",
            "References: <filler-2-2026-1.Quayside.evenrow@quayside.example>\r\n",
            "In-Reply-To: <filler-2-2026-1.Quayside.evenrow@quayside.example>\r\n",
            "<night@quayside.example>",
            "desk@quayside.example",
            // RFC 2047 for names beyond ASCII.
            "=?utf-8?b?",
            "multipart/mixed",
            "Source 07 is low.",
            "filename=\"filler 2-2026-1.svg\"",
            "image/svg+xml",
        ],
    );
    let (text, picture) = (mail.find("text/plain"), mail.find("image/svg+xml"));
    assert!(text < picture, "{mail}");
}

#[test]
fn without_a_picture_a_mail_is_text_alone() {
    let letter = Letter::notice(delivery(7, "a", State::Unacknowledged));
    let mail = written(&letter, None);
    assert_has(&mail, &["Content-Type: text/plain; charset=utf-8"]);
    assert!(!mail.contains("multipart"), "{mail}");
}

#[test]
fn a_digest_and_a_test_belong_to_no_thread_and_show_no_picture() {
    let one = |number| delivery(number, "a", State::Unacknowledged);
    let digest = Letter::digest(vec![one(7), one(8)]).expect("two");
    for letter in [digest, Letter::test(one(9))] {
        let mail = written(&letter, Some("<svg/>"));
        assert!(
            !mail.contains("References") && !mail.contains("svg"),
            "{mail}"
        );
    }
}

#[test]
fn words_beyond_ascii_travel_encoded() {
    let mut one = delivery(7, "a", State::Unacknowledged);
    let notice = std::sync::Arc::make_mut(&mut one.notice);
    notice.subject = "Füller: Düse 7 zu niedrig\r\nBcc: x@y.example".to_owned();
    notice.text = "Düse 7 liegt tief.".to_owned();
    let mail = written(&Letter::notice(one), None);
    assert_has(&mail, &["Subject: =?utf-8?b?"]);
    assert!(
        !mail.contains("\r\nBcc"),
        "a subject adds no header\n{mail}"
    );
}
