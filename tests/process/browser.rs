//! A headless Chromium, driven over the W3C WebDriver protocol (www.w3.org/TR/webdriver2).

use std::process::Command;

use serde_json::{Value, json};

use crate::common::running::{Running, free_port, wait_for};
use crate::daemon::SOON;
use crate::http;

/// Whether the pages' scripts run.
#[derive(Clone, Copy, PartialEq, Eq)]
pub enum Scripts {
    /// As usual.
    On,
    /// Switched off in the browser's settings.
    Off,
}

/// What the reader's system prefers.
#[derive(Clone, Copy, Debug, PartialEq, Eq)]
pub enum Scheme {
    /// Dark on light.
    Light,
    /// Light on dark.
    Dark,
}

/// A browser with one window.
pub struct Browser {
    session: String,
    _driver: Running,
    _profile: tempfile::TempDir,
}

/// What names an element in the protocol's JSON.
const ELEMENT: &str = "element-6066-11e4-a52e-4f735466cecf";

impl Browser {
    /// Starts driver and browser.
    pub fn start(scripts: Scripts) -> Self {
        let port = free_port();
        let driver = Running::start(Command::new("chromedriver").arg(format!("--port={port}")));
        let base = format!("http://127.0.0.1:{port}");
        wait_for(SOON, "the browser's driver", || {
            let status = http::get(&format!("{base}/status")).ok()?;
            (status.status == 200 && status.json()["value"]["ready"] == true).then_some(())
        });
        let profile = tempfile::tempdir().expect("a folder can be made");
        let javascript = if scripts == Scripts::On { 1 } else { 2 };
        // No sandbox: the tests may run as root, and they open nothing but our own pages.
        let wanted = json!({"capabilities": {"alwaysMatch": {
            "browserName": "chrome",
            "goog:loggingPrefs": {"browser": "ALL"},
            "goog:chromeOptions": {
                "args": ["--headless=new", "--no-sandbox", "--disable-gpu",
                    "--disable-dev-shm-usage", "--window-size=1200,900",
                    format!("--user-data-dir={}", profile.path().display())],
                "prefs": {"profile.managed_default_content_settings.javascript": javascript},
            },
        }}});
        let answer = http::post(&format!("{base}/session"), None, &wanted).expect("the driver");
        let made = answer.json();
        let id = made["value"]["sessionId"].as_str();
        let id = id.unwrap_or_else(|| panic!("no browser: {made}"));
        Self {
            session: format!("{base}/session/{id}"),
            _driver: driver,
            _profile: profile,
        }
    }

    #[track_caller]
    fn tell(&self, path: &str, body: &Value) -> Value {
        let answer = http::post(&format!("{}{path}", self.session), None, body);
        let answer = answer.expect("the driver answers");
        assert_eq!(answer.status, 200, "{path}: {}", answer.text);
        answer.json()["value"].clone()
    }

    /// Opens an address and waits until it is loaded.
    #[track_caller]
    pub fn open(&self, address: &str) {
        self.tell("/url", &json!({"url": address}));
    }

    /// The elements that a CSS selector finds, by the protocol's names.
    fn find(&self, selector: &str) -> Vec<String> {
        let wanted = json!({"using": "css selector", "value": selector});
        let found = self.tell("/elements", &wanted);
        let names = found.as_array().expect("a list").iter();
        names
            .filter_map(|e| e[ELEMENT].as_str().map(str::to_owned))
            .collect()
    }

    /// The text that a person sees in the elements of a selector.
    #[track_caller]
    pub fn texts(&self, selector: &str) -> Vec<String> {
        let text = |element: &String| {
            let address = format!("{}/element/{element}/text", self.session);
            // A live page may have replaced the element meanwhile.
            let answer = http::get(&address).ok()?;
            answer.json()["value"].as_str().map(str::to_owned)
        };
        self.find(selector).iter().filter_map(text).collect()
    }

    /// Everything a person can read.
    pub fn text(&self) -> String {
        self.texts("body").concat()
    }

    /// Types into the first element of a selector.
    #[track_caller]
    pub fn type_into(&self, selector: &str, text: &str) {
        let found = self.find(selector);
        let element = found.first().unwrap_or_else(|| panic!("no {selector}"));
        self.tell(&format!("/element/{element}/value"), &json!({"text": text}));
    }

    /// Presses the first element of a selector.
    #[track_caller]
    pub fn press(&self, selector: &str) {
        let found = self.find(selector);
        let element = found.first().unwrap_or_else(|| panic!("no {selector}"));
        self.tell(&format!("/element/{element}/click"), &json!({}));
    }

    /// Makes the window this wide and high, on a system that prefers this.
    #[track_caller]
    pub fn looks_as(&self, width: u32, height: u32, scheme: Scheme) {
        let size = json!({"width": width, "height": height, "deviceScaleFactor": 1,
            "mobile": width < 500});
        self.command("Emulation.setDeviceMetricsOverride", &size);
        let prefers = match scheme {
            Scheme::Light => "light",
            Scheme::Dark => "dark",
        };
        let features = json!([{"name": "prefers-color-scheme", "value": prefers}]);
        self.command("Emulation.setEmulatedMedia", &json!({"features": features}));
    }

    /// A picture of the whole page as PNG, in the driver's base64.
    #[track_caller]
    pub fn picture(&self) -> Vec<u8> {
        let height = self.run("return document.documentElement.scrollHeight");
        let width = self.run("return innerWidth");
        let clip = json!({"x": 0, "y": 0, "width": width, "height": height, "scale": 1});
        let wanted = json!({"format": "png", "captureBeyondViewport": true, "clip": clip});
        let answer = self.command("Page.captureScreenshot", &wanted);
        base64(answer["data"].as_str().expect("a picture"))
    }

    #[track_caller]
    fn command(&self, name: &str, parameters: &Value) -> Value {
        let body = json!({"cmd": name, "params": parameters});
        self.tell("/goog/cdp/execute", &body)
    }

    /// Runs a script in the page and gives what it returns.
    #[track_caller]
    pub fn run(&self, script: &str) -> Value {
        self.tell("/execute/sync", &json!({"script": script, "args": []}))
    }

    /// Runs a script that calls its last argument with what it finds.
    #[track_caller]
    pub fn run_waiting(&self, script: &str) -> Value {
        self.tell("/execute/async", &json!({"script": script, "args": []}))
    }

    /// Where the browser is.
    pub fn address(&self) -> String {
        let answer = http::get(&format!("{}/url", self.session)).expect("the driver answers");
        answer.json()["value"]
            .as_str()
            .unwrap_or_default()
            .to_owned()
    }

    /// What the scripts and the browser complained of since the last time, as they said it.
    pub fn complaints(&self) -> Vec<String> {
        let lines = self.tell("/se/log", &json!({"type": "browser"}));
        let lines = lines.as_array().expect("a list").iter();
        let loud = lines.filter(|l| l["level"] == "SEVERE" || l["level"] == "WARNING");
        loud.map(|l| l["message"].as_str().unwrap_or_default().to_owned())
            .collect()
    }
}

/// Decodes base64 (RFC 4648, section 4).
fn base64(text: &str) -> Vec<u8> {
    const LETTERS: &[u8; 64] = b"ABCDEFGHIJKLMNOPQRSTUVWXYZabcdefghijklmnopqrstuvwxyz0123456789+/";
    let digits = text
        .bytes()
        .filter_map(|c| LETTERS.iter().position(|l| *l == c));
    let (mut bytes, mut held, mut bits) = (Vec::with_capacity(text.len() / 4 * 3), 0_usize, 0);
    for digit in digits {
        held = (held << 6 | digit) & 0xffff;
        bits += 6;
        if bits >= 8 {
            bits -= 8;
            bytes.push((held >> bits & 0xff) as u8);
        }
    }
    bytes
}

#[test]
fn base64_is_decoded() {
    assert_eq!(base64("Zm9vYmFy"), b"foobar");
    assert_eq!(base64("Zm9vYg=="), b"foob");
}

impl Drop for Browser {
    fn drop(&mut self) {
        // Ends the browser itself; its driver is ended as a process of ours.
        let _ = http::delete(&self.session);
    }
}
