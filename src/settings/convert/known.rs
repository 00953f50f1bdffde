//! What is known of a bank's sources beforehand: what they share, where they usually stand, which of
//! them is the reference, and what a unit given away costs.

use crate::model::{Group, Name, Offsets, Sources, Value};
use crate::settings::check::{Check, unfit};
use crate::settings::fault::Place;
use crate::settings::keys;
use crate::settings::raw::{Kind, Node, Table};
use crate::settings::section::{Field, Spot};

/// Groups are contrasts, and all contrasts share one error rate.
const MOST_GROUPS: usize = 50;

/// The keys as written.
pub(super) struct WrittenKnown {
    pub(super) groups: Field<Node>,
    pub(super) cost_per_unit: Field<String>,
    pub(super) reference: Field<String>,
    pub(super) offsets: Field<Node>,
}

/// The same as used.
pub(super) struct Known {
    pub(super) groups: Vec<Group>,
    pub(super) cost_per_unit: Option<f64>,
    pub(super) reference: Option<Name>,
    pub(super) offsets: Offsets,
}

/// Checks the keys against the sources; `declared` says whether there is something to give away from.
pub(super) fn known(
    written: WrittenKnown,
    sources: Option<&Sources>,
    declared: bool,
    check: &mut Check<'_>,
) -> Known {
    let WrittenKnown {
        groups,
        cost_per_unit,
        reference,
        offsets,
    } = written;
    let learn = matches!(offsets.peek(), Some(Spot { value: Node { kind: Kind::Text(word), .. }, .. })
        if word == "learn");
    Known {
        groups: groups_of(groups, sources, check),
        cost_per_unit: cost(cost_per_unit, declared, check),
        reference: reference_of(reference, sources, learn, check),
        offsets: offsets_of(offsets, sources, check),
    }
}

/// Whether a source is listed; says so when it is not, or when nobody can tell.
fn is_source(
    key: &str,
    name: &str,
    place: &Place,
    sources: Option<&Sources>,
    check: &mut Check<'_>,
) -> bool {
    match sources {
        // The list itself is faulty, which has been said.
        None => false,
        Some(Sources::Discover { .. }) => {
            let message = format!("`{key}` names a source, and the sources are discovered");
            let hint = "list the sources in `sources`, so that a slip in a name is found now and \
                        not at night";
            check.add(place, message, hint);
            false
        }
        Some(Sources::Listed(_) | Sources::Shifts(_)) => {
            let listed = sources.and_then(Sources::names).unwrap_or_default();
            if listed.iter().any(|l| **l == *name) {
                return true;
            }
            let message = format!(
                "`{key}` names \"{}\", which is no source",
                name.escape_debug()
            );
            let hint = match keys::nearest(name, listed.iter().map(|l| &**l)) {
                Some(near) => format!("did you mean \"{near}\"?"),
                None => "write a name that stands in `sources`".to_owned(),
            };
            check.add(place, message, hint);
            false
        }
    }
}

fn groups_of(field: Field<Node>, sources: Option<&Sources>, check: &mut Check<'_>) -> Vec<Group> {
    let Some(Spot { value, place }) = field.given() else {
        return Vec::new();
    };
    let Kind::Table(table) = value.kind else {
        let message = format!("`groups` is {} and must be a table", value.kind.what());
        check.add(&place, message, keys::example("bank", "groups"));
        return Vec::new();
    };
    if table.len() > MOST_GROUPS {
        let message = format!("{} groups are more than {MOST_GROUPS}", table.len());
        check.add(
            &place,
            message,
            "leave out those whose sources share nothing that can fail",
        );
    }
    if let (Some(Sources::Discover { .. }), false) = (sources, table.is_empty()) {
        // Said once, and not for every name of every group.
        is_source("groups", "", &place, sources, check);
        return Vec::new();
    }
    let each = table.into_iter();
    each.filter_map(|(name, entry)| group(name, &entry.key, entry.node, sources, check))
        .collect()
}

fn group(
    name: String,
    key: &Place,
    node: Node,
    sources: Option<&Sources>,
    check: &mut Check<'_>,
) -> Option<Group> {
    let example = || keys::example("bank", "groups");
    if let Some(what) = unfit(&name) {
        check.add(key, format!("a group's name {what}"), example());
        return None;
    }
    let Kind::List(list) = node.kind else {
        let message = format!(
            "group \"{name}\" is {} and must be a list",
            node.kind.what()
        );
        check.add(&node.place, message, example());
        return None;
    };
    if list.is_empty() {
        let message = format!("group \"{name}\" is empty");
        check.add(&node.place, message, example());
        return None;
    }
    let mut members: Vec<Name> = Vec::with_capacity(list.len());
    for member in list {
        let Kind::Text(source) = member.kind else {
            let what = member.kind.what();
            let message = format!("group \"{name}\" holds {what} and must hold names in quotes");
            check.add(&member.place, message, example());
            continue;
        };
        if members.iter().any(|m| **m == *source) {
            let message = format!("group \"{name}\" names \"{source}\" twice");
            check.add(&member.place, message, "take one of the two out");
        } else if is_source("groups", &source, &member.place, sources, check) {
            members.push(source.into());
        }
    }
    if let Some(Sources::Listed(listed)) = sources {
        if members.len() == listed.len() {
            let message = format!("group \"{name}\" holds every source");
            check.add(
                key,
                message,
                "a group is compared with the rest, so leave some out",
            );
        }
        members.sort_by_key(|m| listed.iter().position(|l| l == m));
    }
    Some(Group {
        name: name.into(),
        members,
    })
}

fn cost(field: Field<String>, declared: bool, check: &mut Check<'_>) -> Option<f64> {
    let cost = check.number(field, "cost_per_unit", |x| x > 0.0, "above 0")?;
    if !declared {
        let message = "`cost_per_unit` means nothing without `declared`";
        let hint = "what is given away is the mean less the declared quantity: write that too, or take \
                    this out";
        check.add(&cost.place, message, hint);
    }
    Some(cost.value)
}

fn reference_of(
    field: Field<String>,
    sources: Option<&Sources>,
    learn: bool,
    check: &mut Check<'_>,
) -> Option<Name> {
    let Spot { value, place } = field.given()?;
    if learn {
        let message = "`reference` means nothing with `offsets = \"learn\"`";
        let hint = "with learnt offsets each source is compared with its own usual place; take one of \
                    the two out";
        check.add(&place, message, hint);
        return None;
    }
    is_source("reference", &value, &place, sources, check).then(|| Name::from(value))
}

fn offsets_of(field: Field<Node>, sources: Option<&Sources>, check: &mut Check<'_>) -> Offsets {
    let Some(Spot { value, place }) = field.given() else {
        return Offsets::None;
    };
    match value.kind {
        Kind::Text(word) => {
            let word = Field::Given(Spot { value: word, place });
            let words = [("none", false), ("learn", true)];
            match check.word(word, "offsets", &words).map(|spot| spot.value) {
                Some(true) => Offsets::Learn,
                Some(false) | None => Offsets::None,
            }
        }
        Kind::Table(table) => Offsets::Table(offset_table(table, &place, sources, check)),
        other => {
            let message = format!(
                "`offsets` is {} and must be a word or a table",
                other.what()
            );
            check.add(&place, message, keys::example("bank", "offsets"));
            Offsets::None
        }
    }
}

fn offset_table(
    table: Table,
    place: &Place,
    sources: Option<&Sources>,
    check: &mut Check<'_>,
) -> Vec<(Name, f64)> {
    if table.is_empty() {
        let message = "`offsets` is an empty table";
        check.add(place, message, keys::example("bank", "offsets"));
    }
    let mut offsets = Vec::with_capacity(table.len());
    for (source, entry) in table {
        if !is_source("offsets", &source, &entry.key, sources, check) {
            // Nobody is found among discovered sources: said once.
            if let Some(Sources::Discover { .. }) = sources {
                break;
            }
            continue;
        }
        let text = match entry.node.kind {
            Kind::Whole(Some(number)) => number.to_string(),
            Kind::Number(text) => text,
            other => {
                let message = format!(
                    "the offset of \"{source}\" is {} and must be a number without quotes",
                    other.what()
                );
                check.add(&entry.node.place, message, keys::example("bank", "offsets"));
                continue;
            }
        };
        match Value::parse(&text).map(Value::to_f64) {
            Ok(offset) if offset.is_finite() => offsets.push((source.into(), offset)),
            _ => {
                let message = format!("the offset of \"{source}\" is not a finite number");
                check.add(&entry.node.place, message, keys::example("bank", "offsets"));
            }
        }
    }
    offsets
}
