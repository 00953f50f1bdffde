//! The order of discovered sources: by the numbers in their names.

use std::cmp::Ordering;

/// Orders names by the whole numbers in them, so that head 2 stands before head 10.
pub fn natural(a: &str, b: &str) -> Ordering {
    let mut a_rest = a;
    let mut b_rest = b;
    while !a_rest.is_empty() && !b_rest.is_empty() {
        let (a_part, a_next) = part(a_rest);
        let (b_part, b_next) = part(b_rest);
        let order = match (number(a_part), number(b_part)) {
            (Some(x), Some(y)) => x.cmp(&y),
            _ => a_part.cmp(b_part),
        };
        if order != Ordering::Equal {
            return order;
        }
        (a_rest, b_rest) = (a_next, b_next);
    }
    a.len().cmp(&b.len()).then_with(|| a.cmp(b))
}

fn part(text: &str) -> (&str, &str) {
    let digit = text.starts_with(|c: char| c.is_ascii_digit());
    let end = text
        .find(|c: char| c.is_ascii_digit() != digit)
        .unwrap_or(text.len());
    text.split_at(end)
}

fn number(text: &str) -> Option<u128> {
    text.parse().ok()
}

#[cfg(test)]
mod tests {
    use super::natural;

    #[test]
    fn names_stand_in_the_order_of_their_numbers() {
        let mut names = vec![
            "head 10", "head 2", "head 1", "b", "a12", "a3", "007", "7", "08",
        ];
        names.sort_by(|a, b| natural(a, b));
        assert_eq!(
            names,
            [
                "7", "007", "08", "a3", "a12", "b", "head 1", "head 2", "head 10"
            ]
        );
    }
}
