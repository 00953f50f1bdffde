//! Notices by mail: SMTP with STARTTLS (RFC 3207) or encrypted from its start (RFC 8314).
//!
//! Password and authorities are read anew for each attempt. One connection per message: a plant has
//! few notices, and a connection that has stood idle is the one that fails at night. Deliberately
//! absent: what a message looks like, which is in `message`.

mod message;

use std::error::Error;
use std::time::Duration;

use lettre::transport::smtp::authentication::Credentials;
use lettre::transport::smtp::client::{Certificate, CertificateStore, Tls, TlsParameters};
use lettre::transport::smtp::extension::ClientId;
use lettre::{AsyncSmtpTransport, AsyncTransport, Tokio1Executor};

use crate::clock::Clock;
use crate::settings::connection::{self, ConnectionFileError};
use crate::settings::{Encryption, Mail, Outlet};

use super::Picture;
use super::letter::Letter;
use super::postman::{Carrier, Failure};

/// Takes letters to a mail server.
pub struct MailCarrier {
    mail: Mail,
    time_limit: Duration,
    picture: Picture,
    clock: Clock,
}

type Transport = AsyncSmtpTransport<Tokio1Executor>;

impl MailCarrier {
    /// For this server and these people.
    pub fn new(outlet: &Outlet, mail: &Mail, picture: Picture) -> Self {
        Self {
            mail: mail.clone(),
            time_limit: outlet.time_limit,
            picture,
            clock: Clock::System,
        }
    }

    fn transport(&self) -> Result<Transport, Failure> {
        let mail = &self.mail;
        let builder = Transport::builder_dangerous(&mail.host)
            .port(mail.port)
            .tls(self.tls()?)
            .timeout(Some(self.time_limit));
        // Whoever writes from a domain says so when greeting; a bare address makes servers wary.
        let builder = match mail.from.address.rsplit_once('@') {
            Some((_, domain)) => builder.hello_name(ClientId::Domain(domain.to_owned())),
            None => builder,
        };
        let builder = match (&mail.user, &mail.password_file) {
            (Some(user), Some(file)) => {
                let password = connection::password(file).map_err(|e| file_failure(&e))?;
                builder.credentials(Credentials::new(user.clone(), password))
            }
            _ => builder,
        };
        Ok(builder.build())
    }

    fn tls(&self) -> Result<Tls, Failure> {
        let parameters = || self.tls_parameters();
        Ok(match self.mail.encryption {
            Encryption::Always => Tls::Wrapper(parameters()?),
            Encryption::StartTls => Tls::Required(parameters()?),
            Encryption::InClear => Tls::None,
        })
    }

    fn tls_parameters(&self) -> Result<TlsParameters, Failure> {
        let mut builder = TlsParameters::builder(self.mail.host.clone());
        if let Some(file) = &self.mail.ca_file {
            builder = builder.certificate_store(CertificateStore::None);
            let all = connection::authority_certificates(file).map_err(|e| file_failure(&e))?;
            for der in all {
                let one = Certificate::from_der(der.to_vec()).map_err(|e| smtp_failure(&e))?;
                builder = builder.add_root_certificate(one);
            }
        }
        builder.build().map_err(|e| smtp_failure(&e))
    }
}

impl Carrier for MailCarrier {
    async fn carry(&self, letter: &Letter) -> Result<(), Failure> {
        let picture = (self.picture)(&letter.last().notice);
        let message = message::compose(&self.mail, letter, picture, self.clock.now())
            .map_err(|e| Failure::new(format!("the message cannot be written: {e}")))?;
        let transport = self.transport()?;
        match tokio::time::timeout(self.time_limit, transport.send(message)).await {
            Ok(Ok(_)) => Ok(()),
            Ok(Err(e)) => Err(smtp_failure(&e)),
            Err(_) => Err(Failure::new(format!(
                "the mail server did not take the message within {:?}",
                self.time_limit
            ))),
        }
    }
}

fn file_failure(error: &ConnectionFileError) -> Failure {
    Failure::new(error.to_string())
}

/// What went wrong, with what lies behind it.
fn smtp_failure(error: &lettre::transport::smtp::Error) -> Failure {
    let mut why = if error.is_permanent() || error.is_transient() {
        format!("the mail server refuses: {error}")
    } else {
        format!("the mail server cannot be reached: {error}")
    };
    let mut next = error.source();
    while let Some(source) = next {
        let text = source.to_string();
        if !why.contains(&text) {
            why.push_str(": ");
            why.push_str(&text);
        }
        next = source.source();
    }
    Failure::new(why)
}
