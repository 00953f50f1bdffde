//! Small changes to inputs.

/// Pieces that decoders care about.
const PIECES: &[&[u8]] = &[
    b"{",
    b"}",
    b"[",
    b"]",
    b"\"",
    b":",
    b",",
    b";",
    b"\n",
    b"null",
    b"NaN",
    b"-",
    b"1e999",
    b"1e-999",
    b"0",
    b"99999999999999999999",
    b"-0.0",
    b"\\u0000",
    b"\\ud800",
    b"\xff",
    b"\x00",
    b"\xe2\x80\xae",
    b"\"v\":",
    b"\"t\":",
    b"\"bn\":",
    b"\"bver\":11",
    b"\"Payload\":",
    b"\"Messages\":[",
    b"\"UaType\":8",
    b"\"Status\":2147483648",
    b"/",
    b"+",
    b"#",
    b"$SYS",
    b"spBv1.0/Q/NDEATH/n",
    b"\x80\x80\x80\x80\x80\x80\x80\x80\x80\x01",
];

/// Makes inputs from others.
pub struct Mutator(fastrand::Rng);

impl Mutator {
    /// The same seed, the same inputs.
    pub fn new(seed: u64) -> Self {
        Self(fastrand::Rng::with_seed(seed))
    }

    /// One of the corpus, changed in one to eight places.
    pub fn mutated(&mut self, corpus: &[Vec<u8>]) -> Vec<u8> {
        let random = &mut self.0;
        let mut input = corpus
            .get(random.usize(0..corpus.len().max(1)))
            .cloned()
            .unwrap_or_default();
        for _ in 0..random.usize(1..=8) {
            let at = random.usize(0..=input.len());
            let to = at + random.usize(0..=(input.len() - at).min(40));
            match random.u8(0..9) {
                0 if at < input.len() => input[at] ^= 1 << random.u8(0..8),
                1 if at < input.len() => input[at] = random.u8(..),
                2 => input.insert(at, random.u8(..)),
                3 => drop(input.drain(at..to)),
                4 => {
                    let again = input[at..to].to_vec();
                    input.splice(at..at, again);
                }
                5 | 6 => {
                    let piece = PIECES[random.usize(0..PIECES.len())];
                    input.splice(at..to.min(at + random.usize(0..4)), piece.iter().copied());
                }
                7 => {
                    let other = &corpus[random.usize(0..corpus.len())];
                    let from = random.usize(0..=other.len());
                    let until = from + random.usize(0..=(other.len() - from).min(60));
                    input.splice(at..to, other[from..until].iter().copied());
                }
                _ => input.truncate(at.max(1)),
            }
        }
        // Longer ones only take longer.
        input.truncate(20_000);
        input
    }
}
