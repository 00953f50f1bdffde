//! `[[outlet]]`.

use std::time::Duration;

use crate::model::{Name, Shift};
use crate::notice::{Kind, Priority, Route, Updates, Way};
use crate::settings::check::{Check, D, S, duration_us, words};
use crate::settings::fault::{FaultList, Place};
use crate::settings::raw::Node;
use crate::settings::section::{Field, Spot};
use crate::settings::written::{WrittenBank, WrittenOutlet};
use crate::settings::{
    AtMost, Encryption, Mail, Mailbox, Means, Outlet, PlantSettings, Program, Webhook,
};

use super::address::{self, Schemes};

/// How a mail server is spoken to. Ports of RFC 6409 and RFC 8314.
const MAIL: Schemes = &[("smtp", false, 587), ("smtps", true, 465)];

/// Long enough for a slow mail server, short enough that the next outlet's person is told in time.
const TIME_LIMIT_US: i64 = 20 * S;

/// More than this in one stretch is no limit on what people receive.
const MOST_AT_MOST: u32 = 10_000;

/// What the lists of an outlet may name.
pub(super) struct Known {
    banks: Vec<Name>,
    /// `None` when the plant is faulty, which has been said.
    shifts: Option<Vec<Shift>>,
}

impl Known {
    /// The names in the banks as written, and the shifts of the plant.
    pub(super) fn of(banks: &Field<Vec<WrittenBank>>, plant: Option<&PlantSettings>) -> Self {
        let banks = banks.peek().into_iter().flat_map(|spot| &spot.value);
        let names = banks.filter_map(|bank| bank.name.peek());
        Self {
            banks: names.map(|spot| Name::from(&*spot.value)).collect(),
            shifts: plant.map(|p| p.shifts.clone()),
        }
    }
}

/// An outlet.
pub(super) fn outlet(
    written: WrittenOutlet,
    known: &Known,
    faults: &mut FaultList,
) -> Option<Outlet> {
    let WrittenOutlet {
        place,
        name,
        way,
        url,
        secret_file,
        ca_file,
        user,
        password_file,
        in_clear,
        from,
        to,
        program,
        arguments,
        time_limit,
        banks,
        kinds,
        priorities,
        shifts,
        escalate_after,
        updates,
        at_most,
    } = written;
    let mut check = Check::new("outlet", &place, faults);
    let name = check.required(name, "name");
    let name = name_of(name, &mut check);
    let keys = KeysOfWays {
        url,
        secret_file,
        ca_file,
        user,
        password_file,
        in_clear,
        from,
        to,
        program,
        arguments,
    };
    let way = check.required(way, "way");
    let means = match check.word(way, "way", WAYS) {
        Some(way) => keys.means(way.value, &mut check),
        None => None,
    };
    let time_limit = check.duration_us(time_limit, "time_limit", S..=600 * S);
    let lists = Lists {
        banks,
        kinds,
        priorities,
        shifts,
    };
    let after = check.duration_us(escalate_after, "escalate_after", S..=7 * D);
    let updates = check.word(updates, "updates", UPDATES).map(|w| w.value);
    let at_most = cap(at_most, &mut check);
    let (banks, kinds, priorities, shifts) = lists.checked(known, &mut check);
    let (name, means) = (name?, means?);
    // A person wants to be told again of what is new, a program of everything.
    let usual = match means {
        Means::Webhook(_) => Updates::All,
        Means::Mail(_) | Means::Command(_) => Updates::States,
    };
    let us = u64::try_from(time_limit.unwrap_or(TIME_LIMIT_US)).unwrap_or_default();
    Some(Outlet {
        route: Route {
            outlet: name.clone(),
            banks,
            kinds,
            priorities,
            shifts,
            escalate_after_us: after.unwrap_or(0),
            updates: updates.unwrap_or(usual),
        },
        name,
        means,
        at_most,
        time_limit: Duration::from_micros(us),
    })
}

fn name_of(field: Field<String>, check: &mut Check<'_>) -> Option<Name> {
    let place = field.peek().map(|spot| spot.place.clone());
    let name = check.name(field, "name")?;
    if &*name == Way::MQTT {
        let message = format!("`name`: \"{}\" is how the broker is called", Way::MQTT);
        check.add(&place?, message, "give the outlet another name");
        return None;
    }
    Some(name)
}

#[derive(Clone, Copy, Debug, PartialEq, Eq)]
enum By {
    Webhook,
    Mail,
    Command,
}

const WAYS: &[(&str, By)] = &[
    ("webhook", By::Webhook),
    ("mail", By::Mail),
    ("command", By::Command),
];

const UPDATES: &[(&str, Updates)] = &[("states", Updates::States), ("all", Updates::All)];

/// The keys that belong to one way or another.
struct KeysOfWays {
    url: Field<String>,
    secret_file: Field<String>,
    ca_file: Field<String>,
    user: Field<String>,
    password_file: Field<String>,
    in_clear: Field<bool>,
    from: Field<String>,
    to: Field<Vec<Node>>,
    program: Field<String>,
    arguments: Field<Vec<Node>>,
}

impl KeysOfWays {
    fn means(self, way: By, check: &mut Check<'_>) -> Option<Means> {
        self.strangers(way, check);
        match way {
            By::Webhook => self.webhook(check).map(Means::Webhook),
            By::Mail => self.mail(check).map(Means::Mail),
            By::Command => self.command(check).map(Means::Command),
        }
    }

    /// Says which keys mean nothing on this way.
    fn strangers(&self, way: By, check: &mut Check<'_>) {
        use By::{Command, Mail, Webhook};
        let place = |field: &Field<String>| field.peek().map(|s| s.place.clone());
        let list = |field: &Field<Vec<Node>>| field.peek().map(|s| s.place.clone());
        let flag = self.in_clear.peek().map(|s| s.place.clone());
        let all: [(&str, Option<Place>, &[By]); 10] = [
            ("url", place(&self.url), &[Webhook, Mail]),
            ("secret_file", place(&self.secret_file), &[Webhook]),
            ("ca_file", place(&self.ca_file), &[Webhook, Mail]),
            ("user", place(&self.user), &[Mail]),
            ("password_file", place(&self.password_file), &[Mail]),
            ("in_clear", flag, &[Mail]),
            ("from", place(&self.from), &[Mail]),
            ("to", list(&self.to), &[Mail]),
            ("program", place(&self.program), &[Command]),
            ("arguments", list(&self.arguments), &[Command]),
        ];
        let known = WAYS.iter().find(|(_, by)| *by == way);
        let word = known.map_or("", |(word, _)| word);
        for (name, place, ways) in all {
            if let Some(place) = place.filter(|_| !ways.contains(&way)) {
                let message = format!("`{name}` means nothing with `way = \"{word}\"`");
                check.add(&place, message, "take it out");
            }
        }
    }

    fn webhook(self, check: &mut Check<'_>) -> Option<Webhook> {
        let url = check.required(self.url, "url");
        let url = web_address(url, check);
        let secret_file = check.required(self.secret_file, "secret_file");
        let secret_file = check.path(secret_file, "secret_file");
        let ca_file = check.path(self.ca_file, "ca_file");
        let in_clear = url.as_ref().is_some_and(|url| url.starts_with("http://"));
        if let Some(spot) = ca_file.as_ref().filter(|_| in_clear) {
            let message = "`ca_file` means nothing with http://, which does not encrypt";
            let hint = "write https:// in `url`, or take the file out";
            check.add(&spot.place, message, hint);
        }
        Some(Webhook {
            url: url?,
            secret_file: secret_file?.value,
            ca_file: ca_file.map(|spot| spot.value),
        })
    }

    fn mail(self, check: &mut Check<'_>) -> Option<Mail> {
        let url = check.required(self.url, "url");
        let server = address::read(url, "outlet", MAIL, check);
        let encryption = encryption(server.as_ref(), &self.in_clear, check);
        let in_clear = encryption == Encryption::InClear;
        let is_alone = |one: &Field<String>, other: &Field<String>| {
            let spot = one.peek().filter(|_| matches!(other, Field::Absent));
            spot.map(|s| s.place.clone())
        };
        if let Some(place) = is_alone(&self.user, &self.password_file) {
            let hint = "give `password_file` too, or take `user` out";
            check.add(&place, "`user` is given without `password_file`", hint);
        }
        if let Some(place) = is_alone(&self.password_file, &self.user) {
            let message = "a password without a user name says nothing";
            check.add(&place, message, "give `user` too");
        }
        if let Some(spot) = self.user.peek().filter(|_| in_clear) {
            let hint = "take `in_clear` out, or `user` and `password_file`";
            check.add(&spot.place, "the password would travel in clear", hint);
        }
        let user = check.name(self.user, "user");
        let password_file = check.path(self.password_file, "password_file");
        let ca_file = check.path(self.ca_file, "ca_file");
        let from = check.required(self.from, "from");
        let from = from.given().and_then(|spot| mailbox(&spot, "from", check));
        let to = check.required(self.to, "to");
        let to = receivers(to, check);
        let server = server?;
        Some(Mail {
            host: server.host,
            port: server.port,
            encryption,
            user: user.map(|user| user.to_string()),
            password_file: password_file.map(|spot| spot.value),
            ca_file: ca_file.map(|spot| spot.value),
            from: from?,
            to: to?,
        })
    }

    fn command(self, check: &mut Check<'_>) -> Option<Program> {
        let program = check.required(self.program, "program");
        let program = check.path(program, "program");
        let arguments_given = matches!(self.arguments, Field::Given(_));
        let arguments = check.texts(self.arguments, "arguments");
        if arguments_given && arguments.is_none() {
            return None;
        }
        let arguments = arguments.unwrap_or_default().into_iter();
        Some(Program {
            path: program?.value,
            arguments: arguments.map(|spot| spot.value).collect(),
        })
    }
}

/// The address of a receiver: any path, no user and no fragment.
fn web_address(field: Field<String>, check: &mut Check<'_>) -> Option<String> {
    let Spot { value, place } = field.given()?;
    let uri = value.parse::<http::Uri>().ok();
    let web = uri.filter(|uri| matches!(uri.scheme_str(), Some("http" | "https")));
    let Some(authority) = web.as_ref().and_then(http::Uri::authority) else {
        return check.wrong(&place, "url", "is no http:// or https:// address");
    };
    if authority.as_str().contains('@') {
        let hint = "receivers know a webhook by its signature; take the user out";
        check.add(&place, "`url` holds a user or a password", hint);
        return None;
    }
    if authority.host().is_empty() {
        return check.wrong(&place, "url", "names no host");
    }
    Some(value)
}

fn encryption(
    server: Option<&address::Address>,
    in_clear: &Field<bool>,
    check: &mut Check<'_>,
) -> Encryption {
    let tls = server.is_none_or(|server| server.tls);
    match in_clear.peek().filter(|spot| spot.value) {
        Some(spot) if tls && server.is_some() => {
            let message = "`in_clear` means nothing with smtps://, which encrypts from the start";
            check.add(&spot.place, message, "take it out, or write smtp://");
            Encryption::Always
        }
        Some(_) => Encryption::InClear,
        None if tls => Encryption::Always,
        None => Encryption::StartTls,
    }
}

fn receivers(field: Field<Vec<Node>>, check: &mut Check<'_>) -> Option<Vec<Mailbox>> {
    let place = field.peek().map(|spot| spot.place.clone());
    let all = check.texts(field, "to")?;
    if all.is_empty() {
        return check.wrong(&place?, "to", "names nobody");
    }
    let all: Vec<_> = all.iter().map(|spot| mailbox(spot, "to", check)).collect();
    all.into_iter().collect()
}

/// `somebody@somewhere` or `Name <somebody@somewhere>`, in ASCII where it is an address (RFC 5321).
fn mailbox(spot: &Spot<String>, name: &str, check: &mut Check<'_>) -> Option<Mailbox> {
    let text = spot.value.trim();
    let (shown, address) = match text.strip_suffix('>').and_then(|t| t.split_once('<')) {
        Some((shown, address)) => (shown.trim().trim_matches('"'), address.trim()),
        None => ("", text),
    };
    let parts = address.rsplit_once('@');
    let plain = |c: char| c.is_ascii_graphic() && !"<>()[]\\,;:\"@".contains(c);
    let good = parts.is_some_and(|(local, domain)| {
        let fits = |part: &str| !part.is_empty() && part.chars().all(plain);
        fits(local) && fits(domain) && !local.starts_with('.') && !domain.starts_with('.')
    });
    if !good || shown.chars().any(|c| c.is_control() || c == '<') {
        let what = format!(
            "holds \"{}\", which is no address of mail",
            text.escape_debug()
        );
        return check.wrong(&spot.place, name, what);
    }
    Some(Mailbox {
        name: (!shown.is_empty()).then(|| shown.to_owned()),
        address: address.to_owned(),
    })
}

/// The lists that say what goes to an outlet.
struct Lists {
    banks: Field<Vec<Node>>,
    kinds: Field<Vec<Node>>,
    priorities: Field<Vec<Node>>,
    shifts: Field<Vec<Node>>,
}

impl Lists {
    fn checked(
        self,
        known: &Known,
        check: &mut Check<'_>,
    ) -> (Vec<Name>, Vec<Kind>, Vec<Priority>, Vec<Shift>) {
        for (name, list) in [
            ("banks", &self.banks),
            ("kinds", &self.kinds),
            ("priorities", &self.priorities),
            ("shifts", &self.shifts),
        ] {
            // A list that lets nothing through is a slip; taking it out lets everything through.
            if let Some(spot) = list.peek().filter(|spot| spot.value.is_empty()) {
                let hint = format!("without `{name}` all go there; take it out or name some");
                check.add(&spot.place, format!("`{name}` is empty"), hint);
            }
        }
        let banks: Vec<_> = known.banks.iter().map(|b| (&**b, b.clone())).collect();
        let kinds = Kind::ALL.map(|k| (k.word(), k));
        let priorities = [Priority::Low, Priority::Medium, Priority::High].map(|p| (p.word(), p));
        let of_plant = known.shifts.as_deref().unwrap_or_default();
        let shifts: Vec<_> = of_plant
            .iter()
            .map(|s| (&*s.name, s.name.clone()))
            .collect();
        let on = match known.shifts {
            Some(_) => check.words(self.shifts, "shifts", "[[plant.shift]]", &shifts),
            None => None,
        };
        // A shift with pauses stands there in parts.
        let parts = |name: Name| of_plant.iter().filter(move |s| s.name == name).cloned();
        let on: Option<Vec<Shift>> = on.map(|names| names.into_iter().flat_map(parts).collect());
        (
            check
                .words(self.banks, "banks", "bank", &banks)
                .unwrap_or_default(),
            check
                .words(self.kinds, "kinds", "kind of notice", &kinds)
                .unwrap_or_default(),
            check
                .words(self.priorities, "priorities", "priority", &priorities)
                .unwrap_or_default(),
            on.unwrap_or_default(),
        )
    }
}

/// "12 per 1h".
fn cap(field: Field<String>, check: &mut Check<'_>) -> Option<AtMost> {
    let Spot { value, place } = field.given()?;
    let parts = value.split_once(" per ").and_then(|(count, per)| {
        let count: u32 = count.trim().parse().ok()?;
        Some((count, duration_us(per)?))
    });
    let Some((count, us)) = parts else {
        let what = "is no number for a time, such as \"12 per 1h\"";
        return check.wrong(&place, "at_most", what);
    };
    let bounds = 60 * S..=7 * D;
    if !(1..=MOST_AT_MOST).contains(&count) || !bounds.contains(&us) {
        let (least, most) = (words(*bounds.start()), words(*bounds.end()));
        let what = format!("must be 1 to {MOST_AT_MOST} for {least} to {most}");
        return check.wrong(&place, "at_most", what);
    }
    Some(AtMost {
        count,
        per: Duration::from_micros(u64::try_from(us).unwrap_or_default()),
    })
}
