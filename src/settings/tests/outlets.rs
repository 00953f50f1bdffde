//! One change to a good outlet each, and the fault it must give.

use super::{GOOD, check, faults_of, settings};

/// Begins in line 25.
const WEBHOOK: &str = "[[outlet]]
name = \"desk\"
way = \"webhook\"
url = \"https://desk.quayside.example/notices\"
secret_file = \"/etc/evenrow/desk.secrets\"
";

const MAIL: &str = "[[outlet]]
name = \"night\"
way = \"mail\"
url = \"smtp://mail.quayside.example\"
from = \"evenrow <evenrow@quayside.example>\"
to = [\"night@quayside.example\"]
";

const COMMAND: &str = "[[outlet]]
name = \"bell\"
way = \"command\"
program = \"/usr/local/bin/ring\"
";

fn with(outlet: &str) -> String {
    format!("{GOOD}{outlet}")
}

/// What is changed, what it becomes, the line of the fault, and words of its message and hint.
type Case = (&'static str, &'static str, usize, &'static str);

fn check_all(good: &str, cases: &[Case]) {
    assert_eq!(faults_of(&with(good), &[]), []);
    for (from, to, line, words) in cases {
        assert!(good.contains(from), "{from} is not in {good}");
        check(&with(&good.replacen(from, to, 1)), *line, words);
    }
}

#[test]
#[rustfmt::skip]
fn where_a_webhook_goes() {
    check_all(WEBHOOK, &[
        ("name = \"desk\"\n", "", 25, "`name` is missing in [[outlet]]|name = "),
        ("\"desk\"", "\"mqtt\"", 26, "is how the broker is called"),
        ("way = \"webhook\"\n", "", 25, "`way` is missing in [[outlet]]|webhook"),
        ("\"webhook\"", "\"webhok\"", 27, "did you mean \"webhook\""),
        ("url = \"https://desk.quayside.example/notices\"\n", "", 25, "`url` is missing"),
        ("https://", "ftp://", 28, "no http:// or https:// address"),
        ("https://", "https://me:secret@", 28, "holds a user or a password"),
        ("secret_file = \"/etc/evenrow/desk.secrets\"\n", "", 25, "`secret_file` is missing"),
        ("secret_file", "secret = \"x\"\nsecret_file", 29, "no key `secret`|`secret_file`"),
        ("https://desk.quayside.example/notices\"", "http://desk/\"\nca_file = \"/ca.pem\"", 29, "does not encrypt|https://"),
        ("secret_file", "user = \"x\"\nsecret_file", 29, "`user` means nothing with `way = \"webhook\"`"),
        ("secret_file", "to = [\"x@y.example\"]\nsecret_file", 29, "`to` means nothing with"),
        ("secret_file", "program = \"/bin/x\"\nsecret_file", 29, "`program` means nothing with"),
        ("[[outlet]]", "[outlet]", 25, "one table and must be a list|[[outlet]]"),
        ("secret_file", "colour = 1\nsecret_file", 29, "no key `colour`|the keys here are"),
    ]);
}

#[test]
#[rustfmt::skip]
fn what_goes_to_an_outlet() {
    check_all(WEBHOOK, &[
        ("secret_file", "banks = [\"filler-2\", \"filer-2\"]\nsecret_file", 29, "no bank \"filer-2\"|did you mean \"filler-2\""),
        ("secret_file", "banks = \"filler-2\"\nsecret_file", 29, "is text and must be a list"),
        ("secret_file", "banks = [7]\nsecret_file", 29, "holds a whole number and must hold text"),
        ("secret_file", "banks = []\nsecret_file", 29, "`banks` is empty|without `banks` all go there"),
        ("secret_file", "kinds = [\"level\"]\nsecret_file", 29, "no kind of notice \"level\"|level_apart"),
        ("secret_file", "priorities = [\"hihg\"]\nsecret_file", 29, "no priority \"hihg\"|did you mean \"high\""),
        ("secret_file", "shifts = [\"earl\"]\nsecret_file", 29, "no [[plant.shift]] \"earl\"|did you mean \"early\""),
        ("secret_file", "escalate_after = \"0s\"\nsecret_file", 29, "between 1 s and 7 d"),
        ("secret_file", "escalate_after = 10\nsecret_file", 29, "must be text|10min"),
        ("secret_file", "updates = \"figures\"\nsecret_file", 29, "must be \"states\" or \"all\""),
        ("secret_file", "at_most = \"12\"\nsecret_file", 29, "no number for a time|12 per 1h"),
        ("secret_file", "at_most = \"0 per 1h\"\nsecret_file", 29, "must be 1 to 10000"),
        ("secret_file", "at_most = \"5 per 1s\"\nsecret_file", 29, "for 1 min to 7 d"),
        ("secret_file", "time_limit = \"1h\"\nsecret_file", 29, "between 1 s and 10 min"),
    ]);
}

#[test]
#[rustfmt::skip]
fn where_mail_goes() {
    check_all(MAIL, &[
        ("url = \"smtp://mail.quayside.example\"\n", "", 25, "`url` is missing"),
        ("smtp://", "", 28, "how to speak|smtp://mail.quayside.example"),
        ("smtp://", "https://", 28, "must start with smtp:// or smtps://"),
        ("smtp://", "smtp://me:secret@", 28, "holds a user|password_file"),
        ("from = \"evenrow <evenrow@quayside.example>\"\n", "", 25, "`from` is missing"),
        ("evenrow <evenrow@quayside.example>", "evenrow", 29, "`from` holds \"evenrow\", which is no address of mail"),
        ("evenrow <evenrow@quayside.example>", "a@b@c.example", 29, "no address of mail"),
        ("to = [\"night@quayside.example\"]\n", "", 25, "`to` is missing"),
        ("[\"night@quayside.example\"]", "[]", 30, "`to` names nobody"),
        ("[\"night@quayside.example\"]", "\"night@quayside.example\"", 30, "is text and must be a list"),
        ("\"night@quayside.example\"", "\"night@quayside.example, day@quayside.example\"", 30, "no address of mail"),
        ("from", "user = \"x\"\nfrom", 29, "without `password_file`"),
        ("from", "password_file = \"/p\"\nfrom", 29, "without a user"),
        ("from", "password = \"x\"\nfrom", 29, "no key `password`|`password_file`"),
        ("from", "in_clear = true\nuser = \"x\"\npassword_file = \"/p\"\nfrom", 30, "would travel in clear"),
        ("smtp://mail.quayside.example\"", "smtps://mail.quayside.example\"\nin_clear = true", 29, "means nothing with smtps://"),
        ("from", "secret_file = \"/s\"\nfrom", 29, "`secret_file` means nothing with `way = \"mail\"`"),
    ]);
}

#[test]
#[rustfmt::skip]
fn which_command_is_started() {
    check_all(COMMAND, &[
        ("program = \"/usr/local/bin/ring\"\n", "", 25, "`program` is missing"),
        ("/usr/local/bin/ring", " ", 28, "is no path"),
        ("program", "arguments = \"--loud\"\nprogram", 28, "is text and must be a list"),
        ("program", "arguments = [2]\nprogram", 28, "holds a whole number"),
        ("program", "url = \"smtp://x\"\nprogram", 28, "`url` means nothing with `way = \"command\"`"),
    ]);
}

#[test]
fn outlets_have_names_of_their_own_and_variables_leave_them_alone() {
    let two = with(&format!("{WEBHOOK}{WEBHOOK}"));
    check(&two, 31, "two outlets are called \"desk\"|line 26");
    let faults = faults_of(&with(WEBHOOK), &[("EVENROW__OUTLET__URL", "https://x")]);
    assert!(faults[0].message.contains("is a list"), "{faults:#?}");
}

#[test]
fn a_faulty_shift_is_not_told_twice() {
    let outlet = WEBHOOK.replace("secret_file", "shifts = [\"early\"]\nsecret_file");
    let text = with(&outlet).replace("\"06:00\"", "\"6\"");
    check(&text, 6, "`from` is no time of day");
}

#[test]
fn what_is_not_said_is_as_in_the_manual() {
    let all = settings(&with(&format!("{WEBHOOK}{MAIL}{COMMAND}"))).expect("good");
    let updates: Vec<_> = all.outlets.iter().map(|o| o.route.updates).collect();
    use crate::notice::Updates::{All, States};
    assert_eq!(updates, [All, States, States]);
    for outlet in &all.outlets {
        assert_eq!(outlet.time_limit.as_secs(), 20);
        assert_eq!((outlet.at_most, outlet.route.escalate_after_us), (None, 0));
        assert!(outlet.route.banks.is_empty() && outlet.route.shifts.is_empty());
    }
}
