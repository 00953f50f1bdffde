//! Mail against a real mail server.

use std::fs;
use std::path::Path;
use std::process::Command;

use evenrow::notice::State;
use evenrow::outlets::{Report, send_test};
use evenrow::settings::{self, Encryption, Mail, Mailbox, Means};
use tempfile::TempDir;

use crate::common::certificates;
use crate::common::running::{Running, free_port, wait_for};
use crate::parts::{Outlet, SOON, by, delivery};

/// A mail server that ends with its test.
struct Server {
    folder: TempDir,
    port: u16,
    _running: Running,
}

impl Server {
    fn start(mode: &str) -> Self {
        let folder = tempfile::tempdir().expect("a folder");
        certificates::write(folder.path());
        let port = free_port();
        let script = concat!(env!("CARGO_MANIFEST_DIR"), "/tests/outlets/smtp_server.py");
        // Debian's own Python, which has what Debian's packages bring.
        let mut command = Command::new("/usr/bin/python3");
        command.args(["-W", "ignore", script]).arg(folder.path());
        command.args([&port.to_string(), mode]);
        let running = Running::start(&mut command);
        wait_for(SOON, "the mail server", || {
            running.lines().contains(&"ready".to_owned()).then_some(())
        });
        Self {
            folder,
            port,
            _running: running,
        }
    }

    fn path(&self) -> &Path {
        self.folder.path()
    }

    fn mail(&self, number: usize) -> String {
        let file = self.path().join(format!("mail-{number}.eml"));
        let read = || fs::read_to_string(&file).ok();
        wait_for(SOON, "the mail", read).replace("\r\n", "\n")
    }

    fn outlet(&self, encryption: Encryption) -> settings::Outlet {
        let password = self.path().join("password");
        fs::write(&password, "open water ü\n").expect("written");
        let with_user = encryption != Encryption::InClear;
        by(Means::Mail(Mail {
            host: "localhost".to_owned(),
            port: self.port,
            encryption,
            user: with_user.then(|| "evenrow".to_owned()),
            password_file: with_user.then_some(password),
            ca_file: with_user.then(|| self.path().join("ca.pem")),
            from: mailbox(Some("evenrow Küste"), "evenrow@quayside.example"),
            to: vec![
                mailbox(Some("Nachtwache Süd"), "night@quayside.example"),
                mailbox(None, "desk@quayside.example"),
            ],
        }))
    }
}

fn mailbox(name: Option<&str>, address: &str) -> Mailbox {
    Mailbox {
        name: name.map(str::to_owned),
        address: address.to_owned(),
    }
}

const ENVELOPE: &str = "evenrow@quayside.example night@quayside.example,desk@quayside.example";

#[tokio::test(flavor = "multi_thread")]
async fn a_notice_and_its_news_arrive_encrypted_in_one_thread() {
    for (mode, encryption) in [
        ("starttls", Encryption::StartTls),
        ("tls", Encryption::Always),
    ] {
        let server = Server::start(mode);
        let outlet = server.outlet(encryption);
        let mut outlet = Outlet::by(outlet, Some("<svg xmlns='http://www.w3.org/2000/svg'/>"));
        outlet
            .send(1, "filler-2-2026-1", State::Unacknowledged)
            .await;
        assert_eq!(outlet.report().await, Report::Delivered(1));
        outlet.send(2, "filler-2-2026-1", State::Acknowledged).await;
        assert_eq!(outlet.report().await, Report::Delivered(2));
        let [first, second] = [1, 2].map(|n| server.mail(n));
        let start = format!("encrypted evenrow {ENVELOPE}\n");
        assert!(first.starts_with(&start), "{mode}: {first}");
        for part in [
            "Subject: filler 2: 07 low by 1.3 g\n",
            "Source 07 is low.",
            "image/svg+xml",
        ] {
            assert!(first.contains(part), "{part:?} is not in\n{first}");
        }
        let header = |mail: &str, name: &str| {
            let line = mail
                .lines()
                .find(|l| l.starts_with(name))
                .map(str::to_owned);
            line.unwrap_or_else(|| panic!("{name} is not in\n{mail}"))
        };
        assert_eq!(
            header(&first, "References:"),
            header(&second, "References:")
        );
        assert_ne!(
            header(&first, "Message-ID:"),
            header(&second, "Message-ID:")
        );
        outlet.end().await;
    }
}

#[tokio::test(flavor = "multi_thread")]
async fn a_relay_that_cannot_encrypt_is_used_only_when_that_is_said() {
    let server = Server::start("clear");
    let test = || delivery(1, "a", State::Unacknowledged);
    let in_clear = server.outlet(Encryption::InClear);
    assert_eq!(send_test(&in_clear, test()).await, Ok(()));
    let mail = server.mail(1);
    assert!(
        mail.starts_with(&format!("clear nobody {ENVELOPE}\n")),
        "{mail}"
    );
    let wary = server.outlet(Encryption::StartTls);
    let why = send_test(&wary, test())
        .await
        .expect_err("no encryption there");
    assert!(why.contains("STARTTLS"), "{why}");
    assert!(!server.path().join("mail-2.eml").exists());
}

#[tokio::test(flavor = "multi_thread")]
async fn a_wrong_password_an_unknown_authority_and_a_refusal_are_named() {
    let server = Server::start("starttls");
    let outlet = server.outlet(Encryption::StartTls);
    let test = || delivery(1, "a", State::Unacknowledged);
    fs::write(server.path().join("password"), "wrong\n").expect("written");
    let why = send_test(&outlet, test())
        .await
        .expect_err("a wrong password");
    assert!(why.contains("535"), "{why}");
    let _right = server.outlet(Encryption::StartTls);

    let refuse = server.path().join("refuse");
    fs::write(&refuse, "451 the disk is full").expect("written");
    let mut running = Outlet::by(outlet.clone(), None);
    running.send(1, "a", State::Unacknowledged).await;
    let why = running.trouble(1).await;
    assert!(why.contains("the disk is full"), "{why}");
    fs::remove_file(&refuse).expect("it was there");
    assert_eq!(running.report().await, Report::Delivered(1));
    running.end().await;

    let other = tempfile::tempdir().expect("a folder");
    certificates::write(other.path());
    fs::copy(other.path().join("ca.pem"), server.path().join("ca.pem")).expect("copied");
    let why = send_test(&outlet, test())
        .await
        .expect_err("another authority");
    assert!(why.contains("certificate"), "{why}");
}

#[tokio::test(flavor = "multi_thread")]
async fn an_absent_server_is_named() {
    let mut server = Server::start("clear");
    server.port = free_port();
    let outlet = server.outlet(Encryption::InClear);
    let test = delivery(1, "a", State::Unacknowledged);
    let why = send_test(&outlet, test).await.expect_err("nobody there");
    assert!(why.contains("cannot be reached"), "{why}");
}
