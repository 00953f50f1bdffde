//! Payloads of every form: what is good, and the fault that each slip must give.

use super::{check, faults_of, good_with};

/// The payload of the good configuration, in line 19; its topic, in line 18, names the source.
const PAYLOAD: &str = "{ form = \"json\", value = \"/v\", cycle = \"/n\" }";
const NAMED: &str = "quayside/filler2/head/{source}/net";
const PLAIN: &str = "quayside/filler2/net";
const EDGE: &str = "spBv1.0/Quayside/+/filler2/scale";

/// The good configuration with this topic and payload.
fn with(topic: &str, payload: &str) -> String {
    good_with(PAYLOAD, payload).replace(NAMED, topic)
}

#[test]
#[rustfmt::skip]
fn these_are_good() {
    for (topic, payload) in [
        (PLAIN, r#"{ form = "json", list = "", item = { value = "/v", source = "/s", cycle = "/n" } }"#),
        (PLAIN, r#"{ form = "json", list = "/l", item = { value = "/v", source = "/s", time = "/t", unit = "/u" }, cycle = "/n", unit_written = "GRM" }"#),
        (PLAIN, r#"{ form = "json", by_source = "", cycle = "/n", time = "/t", time_form = "local" }"#),
        (PLAIN, r#"{ form = "json", by_source = "/h", item = { value = "/v", cycle = "/n" } }"#),
        (PLAIN, r#"{ form = "json", value = "/v", source = { counter = "/n" } }"#),
        (PLAIN, r#"{ form = "json", list = "/l", item = { value = "/v", source = { counter = "/n", at_zero = "02" } } }"#),
        (NAMED, r#"{ form = "csv", value = 2, cycle = 1 }"#),
        (PLAIN, r#"{ form = "csv", value = 2, source = { counter = 1 }, decimal = "comma", separator = "\t" }"#),
        (PLAIN, r#"{ form = "csv", header = ["a", "b", "c"], value = "a", source = "b", cycle = 3 }"#),
        (EDGE, r#"{ form = "sparkplug", value = "Head {source}", cycle = "Turn" }"#),
        ("spBv1.0/Quayside/+/filler2/{source}", r#"{ form = "sparkplug", value = "Net", cycle = "Turn", reorder = "0s", rebirth = true }"#),
        (PLAIN, r#"{ form = "opc_ua_json", value = "Head{source}", cycle = "Turn", writer = "w" }"#),
        (PLAIN, r#"{ form = "opc_ua_json", value = "Net", source = "Head", cycle = "Turn" }"#),
        (PLAIN, r#"{ form = "senml", value = "head{source}", cycle = "turn", unit_written = "kg" }"#),
        (NAMED, r#"{ form = "senml", value = "net", cycle = "turn" }"#),
    ] {
        assert_eq!(faults_of(&with(topic, payload), &[]), [], "{payload}");
    }
}

#[test]
#[rustfmt::skip]
fn json_slips() {
    for (topic, payload, line, words) in [
        (PLAIN, r#"{ form = "json", list = "/l", by_source = "/m", cycle = "/n", item = { value = "/v" } }"#, 19, "both given"),
        (NAMED, r#"{ form = "json", value = "/v", cycle = "/n", item = { value = "/v" } }"#, 19, "`item` means nothing with one measurement"),
        (PLAIN, r#"{ form = "json", list = "l", cycle = "/n", item = { value = "/v", source = "/s" } }"#, 19, "the pointer `list` must start with /"),
        (PLAIN, r#"{ form = "json", list = "/l", cycle = "/n", item = { source = "/s" } }"#, 19, "`value` is missing in `payload`"),
        (PLAIN, r#"{ form = "json", list = "/l", cycle = "/n", item = { value = "/v" } }"#, 18, "nothing names the source"),
        (PLAIN, r#"{ form = "json", list = "/l", cycle = "/n", item = { value = "/v", source = "/s", cycle = "/n" } }"#, 19, "`cycle` is told twice"),
        (PLAIN, r#"{ form = "json", list = "/l", value = "/v", cycle = "/n", item = { value = "/v", source = "/s" } }"#, 19, "`value` stands in each item"),
        (PLAIN, r#"{ form = "json", list = "/l", cycle = "/n", item = { value = 3, source = "/s" } }"#, 19, "is a number and must be text|\"/3\""),
        (PLAIN, r#"{ form = "json", list = "/l", cycle = "/n", item = { value = "/v", sorce = "/s", source = "/s" } }"#, 19, "no key `sorce`"),
        (NAMED, r#"{ form = "json", by_source = "/m", cycle = "/n" }"#, 19, "told twice: by {source}"),
        (PLAIN, r#"{ form = "json", by_source = "/m", source = "/s", cycle = "/n" }"#, 19, "told twice in the payload"),
        (PLAIN, r#"{ form = "json", value = "/v", source = { counter = "/n" }, cycle = "/n" }"#, 19, "follows from `counter` already"),
        (PLAIN, r#"{ form = "json", value = "/v", source = { counter = "/n", at_zero = "9" } }"#, 19, "none of `sources`"),
        (PLAIN, r#"{ form = "json", value = "/v", source = { at_zero = "01" } }"#, 19, "`counter` is missing in `payload.source`"),
        (PLAIN, r#"{ form = "json", value = "/v", source = ["/s"] , cycle = "/n" }"#, 19, "`source` is a list"),
        (NAMED, r#"{ form = "json", value = "/v", cycle = "/n", unit_written = "kg" }"#, 19, "without `unit`"),
        (NAMED, r#"{ form = "json", value = "/v", cycle = "/n", decimal = "comma" }"#, 19, "`decimal` means nothing with `form = \"json\"`|\"csv\""),
    ] {
        check(&with(topic, payload), line, words);
    }
    let discovered = with(PLAIN, r#"{ form = "json", value = "/v", source = { counter = "/n" } }"#)
        .replace("[\"01\", \"02\", \"03\", \"04\"]", "\"discover\"");
    check(&discovered, 19, "only follow from a counter when `sources` lists them");
}

#[test]
#[rustfmt::skip]
fn slips_of_the_other_forms() {
    for (topic, payload, line, words) in [
        (NAMED, r#"{ form = "csv", value = 0, cycle = 1 }"#, 19, "between 1 and 1000|counted from 1"),
        (NAMED, r#"{ form = "csv", value = "net", cycle = 1 }"#, 19, "no `header` is given"),
        (NAMED, r#"{ form = "csv", header = ["a", "b"], value = "net", cycle = 1 }"#, 19, "none of `header`|a, b"),
        (NAMED, r#"{ form = "csv", header = ["a", "b"], value = 3, cycle = 1 }"#, 19, "between 1 and 2"),
        (NAMED, r#"{ form = "csv", header = ["a", "a"], value = 1, cycle = 1 }"#, 19, "is there twice"),
        (NAMED, r#"{ form = "csv", value = 1, cycle = 2, separator = "::" }"#, 19, "one mark"),
        (NAMED, r#"{ form = "csv", value = 1, cycle = 2, separator = ",", decimal = "comma" }"#, 19, "both a comma"),
        (NAMED, r#"{ form = "csv", value = 1, cycle = 2, decimal = "dot" }"#, 19, "\"point\" or \"comma\""),
        (PLAIN, r#"{ form = "sparkplug", value = "Head {source}", cycle = "Turn" }"#, 18, "none of a Sparkplug B edge node|spBv1.0/GROUP/+/NODE"),
        ("spBv1.0/Quayside/DDATA/n/d", r#"{ form = "sparkplug", value = "Head {source}", cycle = "Turn" }"#, 18, "none of a Sparkplug B edge node"),
        (EDGE, r#"{ form = "sparkplug", value = "Head", cycle = "Turn" }"#, 18, "nothing names the source"),
        (EDGE, r#"{ form = "sparkplug", value = "{source}{source}", cycle = "Turn" }"#, 19, "{source} twice"),
        (EDGE, r#"{ form = "sparkplug", value = "Head {source}", cycle = "Turn", reorder = "1h" }"#, 19, "between 0 ms and 10 min"),
        (EDGE, r#"{ form = "sparkplug", value = "Head {source}", cycle = "Turn", time = "/t" }"#, 19, "`time` means nothing with `form = \"sparkplug\"`"),
        (PLAIN, r#"{ form = "opc_ua_json", value = "Head{source}", source = "Head", cycle = "Turn" }"#, 19, "told twice in the payload"),
        (NAMED, r#"{ form = "opc_ua_json", value = "Head{source}", cycle = "Turn" }"#, 19, "told twice: by {source}"),
        (PLAIN, r#"{ form = "opc_ua_json", value = "Net", source = { counter = "n" }, cycle = "Turn" }"#, 19, "must be the name of a field"),
        (PLAIN, r#"{ form = "opc_ua_json", value = 3, source = "Head", cycle = "Turn" }"#, 19, "`value` must be a name"),
        (PLAIN, r#"{ form = "senml", value = "head{source}" }"#, 21, "pairing by cycle needs the cycle"),
        (PLAIN, r#"{ form = "senml", cycle = "turn" }"#, 19, "`value` is missing"),
    ] {
        check(&with(topic, payload), line, words);
    }
}

#[test]
#[rustfmt::skip]
fn what_is_believed() {
    for (line, words) in [
        ("sentinels = [\"-127\"]", "a sentinel is text and must be a number"),
        ("sentinels = [nan]", "not a finite number"),
        ("sentinels = -127", "`sentinels` is a whole number and must be a list"),
        ("plausible = {}", "neither `lower` nor `upper`"),
        ("plausible = { lower = 3, upper = 3.0 }", "`lower` must lie below `upper`"),
        ("plausible = { lowest = 3, upper = 4 }", "did you mean `lower`"),
    ] {
        check(&good_with("unit = \"g\"", &format!("unit = \"g\"\n{line}")), 17, words);
    }
}
