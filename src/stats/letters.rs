//! A shared-letter table: sources that share a letter are not shown to differ.
//!
//! Insert and absorb (Piepho 2004, J. Comput. Graph. Statist. 13, 456–466): starting from one letter
//! for all, every pair that differs splits each letter both carry in two, and a letter whose sources
//! all carry another one is dropped. So 1 770 pairs fit in one line.

/// The letters of each source, as indices from 0 on.
///
/// `order` lists the sources in the order in which letters are handed out (by mean, say); a source
/// that is not listed gets no letter. `differ(a, b)` tells whether a pair is apart; it is asked once
/// for each pair of listed sources. Two sources share a letter exactly when they are not apart.
pub fn shared_letters(order: &[usize], differ: impl Fn(usize, usize) -> bool) -> Vec<Vec<usize>> {
    let k = order.len();
    let mut columns = if k == 0 {
        Vec::new()
    } else {
        vec![vec![true; k]]
    };
    for i in 0..k {
        for j in i + 1..k {
            if differ(order[i], order[j]) {
                columns = split(columns, i, j);
            }
        }
    }
    columns.sort_by_key(|column| column.iter().position(|in_it| *in_it));
    let sources = order.iter().copied().max().map_or(0, |m| m + 1);
    let mut letters = vec![Vec::new(); sources];
    for (letter, column) in columns.iter().enumerate() {
        for (place, _) in column.iter().enumerate().filter(|(_, in_it)| **in_it) {
            letters[order[place]].push(letter);
        }
    }
    letters
}

/// Letters as text: a to z, A to Z, then a2, b2 and so on.
pub fn letters_text(letters: &[usize]) -> String {
    const ALPHABET: &[u8; 52] = b"abcdefghijklmnopqrstuvwxyzABCDEFGHIJKLMNOPQRSTUVWXYZ";
    let one = |&letter: &usize| {
        let name = char::from(ALPHABET[letter % ALPHABET.len()]);
        match letter / ALPHABET.len() {
            0 => name.to_string(),
            round => format!("{name}{}", round + 1),
        }
    };
    letters.iter().map(one).collect()
}

/// Splits every column that holds both, then drops columns that lie within others.
fn split(columns: Vec<Vec<bool>>, i: usize, j: usize) -> Vec<Vec<bool>> {
    let (halves, mut kept): (Vec<_>, Vec<_>) = columns.into_iter().partition(|c| c[i] && c[j]);
    let mut fresh = Vec::with_capacity(2 * halves.len());
    for column in halves {
        for out in [i, j] {
            let mut half = column.clone();
            half[out] = false;
            fresh.push(half);
        }
    }
    // Columns kept from before contain no other; only the fresh ones can lie within one.
    for (index, half) in fresh.iter().enumerate() {
        let within = |other: &Vec<bool>| half.iter().zip(other).all(|(a, b)| !a || *b);
        let among_fresh = fresh
            .iter()
            .enumerate()
            .any(|(o, other)| o != index && within(other) && (other != half || o < index));
        if !among_fresh && !kept.iter().any(within) {
            kept.push(half.clone());
        }
    }
    kept
}
