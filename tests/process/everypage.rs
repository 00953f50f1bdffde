//! Every page in a real browser, light and dark, on a phone and on a wall: nothing needs sideways
//! scrolling, accessibility checks find nothing, and the pictures are left to be looked at. The time
//! band by keyboard; and how soon a page is painted.

use std::fs;
use std::path::Path;

use crate::browser::{Browser, Scheme, Scripts};
use crate::common::mosquitto::Mosquitto;
use crate::common::running::wait_for;
use crate::daemon::{Daemon, Plant, SOON, Wanted};
use crate::line::Line;
use crate::page::drifted;

/// axe-core 4.14.1, see tests/fixtures/README.md.
const AXE: &str = include_str!("../fixtures/axe/axe.min.js");

/// The pages of a plant with one bank and one notice, with names for their pictures.
fn pages(notice: &str) -> Vec<(&'static str, String)> {
    let hour_ago = "2020-01-01T00:00:00Z";
    vec![
        ("plant", "/".to_owned()),
        ("bank", "/banks/filler-2".to_owned()),
        ("bank-span", "/banks/filler-2?span=80".to_owned()),
        ("bank-then", format!("/banks/filler-2?at={hour_ago}")),
        ("source", "/banks/filler-2/sources/05".to_owned()),
        ("notices", "/notices".to_owned()),
        ("notice", format!("/notices/{notice}")),
        ("settings", "/settings".to_owned()),
        ("about", "/about".to_owned()),
        ("sign-in", "/sign-in".to_owned()),
        ("missing", "/banks/none".to_owned()),
    ]
}

/// A daemon that has named head 05.
fn named(broker: &Mosquitto) -> (Plant, Daemon, String) {
    let plant = Plant::new(broker.port(), &Wanted::default());
    let daemon = plant.start_ready();
    let id = drifted(broker, &daemon, &mut Line::new());
    (plant, daemon, id)
}

/// What the accessibility checks find, a line each.
fn violations(browser: &Browser) -> Vec<String> {
    let check = format!(
        "{AXE}; const done = arguments[arguments.length - 1]; \
         axe.run(document).then((found) => done({{ passes: found.passes.length, \
         violations: found.violations.map((v) => v.id + ': ' + v.nodes.map((n) => n.target.join(' ')).join(', ')) }}))"
    );
    let found = browser.run_waiting(&check);
    assert!(
        found["passes"].as_u64() > Some(10),
        "nothing was checked: {found}"
    );
    let list = found["violations"].as_array().expect("a list").iter();
    list.filter_map(|v| v.as_str().map(str::to_owned)).collect()
}

#[test]
fn every_page_suits_every_screen_and_reader() {
    let broker = Mosquitto::start();
    let (_plant, daemon, id) = named(&broker);
    let left_at = Path::new(env!("CARGO_MANIFEST_DIR")).join("target/pages");
    fs::create_dir_all(&left_at).expect("a folder for the pictures");
    let browser = Browser::start(Scripts::On);
    for (name, path) in pages(&id) {
        for (width, height, scheme) in [
            (1280, 900, Scheme::Light),
            (1280, 900, Scheme::Dark),
            (360, 740, Scheme::Light),
            (1920, 1080, Scheme::Dark),
        ] {
            browser.looks_as(width, height, scheme);
            browser.open(&daemon.address(&path));
            let needs = browser.run("return document.documentElement.scrollWidth");
            assert!(
                needs.as_u64() <= Some(u64::from(width)),
                "{path} is {needs} wide on a screen of {width}"
            );
            if width != 1920 {
                let found = violations(&browser);
                assert!(found.is_empty(), "{path} {width} {scheme:?}: {found:#?}");
            }
            let file = left_at.join(format!("{name}-{width}-{scheme:?}.png").to_lowercase());
            fs::write(file, browser.picture()).expect("the picture is written");
        }
    }
    let loud = browser.complaints();
    let expected = |line: &&String| !line.contains("/banks/none");
    assert_eq!(loud.iter().find(expected), None, "{loud:#?}");
    drop(browser);
    daemon.end(&[]);
}

#[test]
fn the_time_band_is_read_and_cut_by_keys_alone() {
    let broker = Mosquitto::start();
    let (_plant, daemon, _) = named(&broker);
    let browser = Browser::start(Scripts::On);
    browser.open(&daemon.address("/banks/filler-2"));
    let reading = |words: &str| {
        wait_for(SOON, words, || {
            let said = browser.texts("#reading").concat();
            said.starts_with(words).then_some(said)
        })
    };
    let (left, down) = ("\u{e012}", "\u{e015}");
    browser.type_into("#probe", left);
    reading("01 until ");
    for _ in 0..4 {
        browser.type_into("#probe", down);
    }
    let said = reading("05 until ");
    assert!(said.contains(" g") || said.contains("no figure"), "{said}");
    browser.type_into("#probe", "+");
    wait_for(SOON, "a shorter stretch", || {
        browser.address().contains("from=").then_some(())
    });
    assert!(browser.texts("svg.band").len() == 1, "{}", browser.text());
    // The cut stays while the span changes.
    browser.press("#level .spans a[href*='span=20']");
    wait_for(SOON, "another span of the same cut", || {
        let address = browser.address();
        (address.contains("span=20") && address.contains("from=")).then_some(())
    });
    let complaints = browser.complaints();
    assert!(complaints.is_empty(), "{complaints:#?}");
    drop(browser);
    daemon.end(&[]);
}

/// The middle one of several times from the start of loading to the first paint, in milliseconds.
fn first_paint_ms(browser: &Browser, address: &str) -> f64 {
    let mut times: Vec<f64> = (0..7)
        .map(|_| {
            browser.open(address);
            wait_for(SOON, "a paint", || {
                let script = "const p = performance.getEntriesByName('first-paint')[0]; \
                              return p ? p.startTime : null";
                browser.run(script).as_f64()
            })
        })
        .collect();
    times.sort_by(f64::total_cmp);
    times[times.len() / 2]
}

#[test]
fn a_page_is_painted_nearly_as_soon_as_an_empty_one() {
    let broker = Mosquitto::start();
    let (_plant, daemon, _) = named(&broker);
    let browser = Browser::start(Scripts::On);
    let empty = first_paint_ms(&browser, &daemon.address("/health/live"));
    for path in ["/", "/banks/filler-2", "/banks/filler-2/sources/05"] {
        let own = first_paint_ms(&browser, &daemon.address(path));
        println!("{path}: first paint after {own:.0} ms, {empty:.0} ms of an empty page");
        assert!(
            own <= 4.0 * empty.max(20.0),
            "{path}: {own} ms, empty {empty} ms"
        );
    }
    drop(browser);
    daemon.end(&[]);
}
