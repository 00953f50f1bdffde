//! How long statistics take, against the targets they were given and, where R is present, against R
//! on the same data in the same run.
//!
//! `cargo bench --bench stats` prints one line per figure: processor time per run, best wall time,
//! target, met or missed. Processor time is read from the kernel where it tells (Linux), so that other
//! work on the machine disturbs less; else it is the mean wall time.

#[path = "processor.rs"]
mod processor;

use evenrow::stats::dist::studentized_range::{self, RangeTable};
use evenrow::stats::{brown_forsythe, games_howell, summarize, welch};
use std::hint::black_box;
use std::io::Write;
use std::process::{Command, Stdio};
use std::time::Instant;

const SOURCES: usize = 60;
const VALUES: usize = 100;

fn main() {
    println!("figure | processor time | best wall time | target | outcome");
    summaries();
    tails();
    tables();
    let ours = one_look();
    thousand_banks();
    rival(ours);
}

/// Values of one bank: a fixed sequence, near enough to normal, all sources alike.
fn bank(seed: u64) -> Vec<f64> {
    let mut state = seed.wrapping_mul(0x9e37_79b9_7f4a_7c15) | 1;
    let mut uniform = || {
        state ^= state << 13;
        state ^= state >> 7;
        state ^= state << 17;
        (state >> 11) as f64 / 9_007_199_254_740_992.0
    };
    let mut normal = || 500.0 + (0..12).map(|_| uniform()).sum::<f64>() - 6.0;
    (0..SOURCES * VALUES).map(|_| normal()).collect()
}

/// Seconds of one processor per run, and the best wall seconds of a run.
fn time(runs: usize, mut work: impl FnMut()) -> (f64, f64) {
    work();
    let (wall, processor) = (Instant::now(), processor::seconds());
    let mut best = f64::INFINITY;
    for _ in 0..runs {
        let start = Instant::now();
        work();
        best = best.min(start.elapsed().as_secs_f64());
    }
    let whole = wall.elapsed().as_secs_f64();
    let spent = processor::seconds()
        .zip(processor)
        .map_or(whole, |(after, before)| after - before);
    (spent / runs as f64, best)
}

fn report(figure: &str, (spent, best): (f64, f64), scale: f64, unit: &str, target: f64) {
    let outcome = if spent * scale <= target {
        "met"
    } else {
        "missed"
    };
    println!(
        "{figure} | {:.3} {unit} | {:.3} {unit} | {target} {unit} | {outcome}",
        spent * scale,
        best * scale
    );
}

fn summaries() {
    let values = bank(1);
    let seconds = time(40_000, || {
        for source in black_box(&values).chunks_exact(VALUES) {
            black_box(summarize(source));
        }
    });
    let per_value = 1e9 / values.len() as f64;
    report("summary, per value", seconds, per_value, "ns", 2.0);
}

fn tails() {
    let table = studentized_range::table(SOURCES).expect("60 sources are within reach");
    for df in [1.0, 3.0, 10.0, 39.0, 198.0, 5940.0, 1e6, f64::INFINITY] {
        let seconds = time(1_000, || sweep(&table, df));
        report(
            &format!("studentized range tail, k 60, df {df}"),
            seconds,
            1e6 / 200.0,
            "us",
            1.5,
        );
    }
}

fn sweep(table: &RangeTable, df: f64) {
    for i in 0..200 {
        let q = 0.5 + 0.05 * f64::from(i);
        black_box(table.sf(black_box(q), df).expect("within reach"));
    }
}

/// Every piece of a table that nobody has asked for yet.
fn tables() {
    let mut k = 61;
    let seconds = time(30, || {
        let table = studentized_range::table(k).expect("within reach");
        for i in 0..120 {
            let q = 0.25 + 0.5 * f64::from(i);
            black_box(table.sf(q, f64::INFINITY).expect("within reach"));
        }
        k += 1;
    });
    report("whole table of one k, 61 to 91", seconds, 1e3, "ms", 6.0);
}

fn look(values: &[f64]) {
    let groups: Vec<&[f64]> = values.chunks_exact(VALUES).collect();
    black_box(brown_forsythe(&groups).expect("not degenerate"));
    black_box(welch(&groups).expect("not degenerate"));
    black_box(games_howell(&groups).expect("not degenerate"));
}

fn one_look() -> f64 {
    let values = bank(2);
    let seconds = time(200, || look(black_box(&values)));
    report(
        "look of 60 x 100: Brown-Forsythe, Welch, 1770 Games-Howell",
        seconds,
        1e3,
        "ms",
        3.0,
    );
    seconds.0
}

fn thousand_banks() {
    let banks: Vec<Vec<f64>> = (0..1000).map(bank).collect();
    let seconds = time(3, || banks.iter().for_each(|values| look(values)));
    report("looks of 1000 such banks", seconds, 1.0, "s", 5.0);
}

/// The same look in R: its own anova, oneway.test and ptukey.
const SCRIPT: &str = r#"
input <- file("stdin"); y <- scan(input, quiet = TRUE); close(input); g <- factor(rep(1:60, each = 100))
look <- function() {
  anova(lm(abs(y - ave(y, g, FUN = median)) ~ g)); oneway.test(y ~ g)
  m <- tapply(y, g, mean); v <- tapply(y, g, var) / 100
  p <- combn(60, 2); s <- v[p[1, ]] + v[p[2, ]]
  df <- s^2 / ((v[p[1, ]]^2 + v[p[2, ]]^2) / 99)
  ptukey(sqrt(2) * abs(m[p[1, ]] - m[p[2, ]]) / sqrt(s), 60, df, lower.tail = FALSE)
}
invisible(look()); cat(median(sapply(1:9, function(i) system.time(look())[["user.self"]])))
"#;

fn rival(ours: f64) {
    match r_seconds() {
        Some(theirs) => {
            let ratio = theirs / ours;
            let outcome = if ratio >= 40.0 { "met" } else { "missed" };
            println!(
                "the same look in R | {:.1} ms | | {ratio:.0} times ours, target 40 | {outcome}",
                theirs * 1e3
            );
        }
        None => println!("the same look in R | R is not present | | |"),
    }
}

fn r_seconds() -> Option<f64> {
    let mut child = Command::new("Rscript")
        .args(["-e", SCRIPT])
        .stdin(Stdio::piped())
        .stdout(Stdio::piped())
        .spawn()
        .ok()?;
    let text: Vec<String> = bank(2).iter().map(f64::to_string).collect();
    child
        .stdin
        .take()?
        .write_all(text.join("\n").as_bytes())
        .ok()?;
    let output = child.wait_with_output().ok()?;
    String::from_utf8(output.stdout).ok()?.trim().parse().ok()
}
