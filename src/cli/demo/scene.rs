//! What the demo needs before it starts: a folder, a token, and a configuration file like any plant's.
//!
//! Owns the temporary folder and removes it when dropped; a folder that was asked for stays.

use std::fs;
use std::io;
use std::net::SocketAddr;
use std::path::{Path, PathBuf};

use super::filler::{HEADS, TARGET_G};
use super::story::{CYCLE_US, head_name};

/// Time between looks at the default speed, in microseconds.
const LOOK_EVERY_US: i64 = 10 * CYCLE_US;
/// Looks come no faster than this, whatever the speed: the shortest that a configuration may ask for.
const SHORTEST_LOOK_US: i64 = 1_000_000;

/// Why the demo could not be set up.
#[derive(Debug, thiserror::Error)]
pub enum SceneError {
    /// The folder cannot be made.
    #[error("the folder {} cannot be made: {source}", folder.display())]
    Folder {
        /// Which.
        folder: PathBuf,
        /// What the system says.
        source: io::Error,
    },
    /// A file cannot be written into it.
    #[error("{} cannot be written: {source}", file.display())]
    File {
        /// Which.
        file: PathBuf,
        /// What the system says.
        source: io::Error,
    },
    /// The system gives no random bytes.
    #[error("the system gives no random bytes for a token")]
    NoRandomness,
}

/// The folder and what is in it.
#[derive(Debug)]
pub struct Scene {
    folder: PathBuf,
    temporary: bool,
    /// The token that changing requests need.
    pub token: String,
}

impl Scene {
    /// Makes the folder (a temporary one when none is asked for) and a token in it.
    ///
    /// # Errors
    /// When the folder or the token's file cannot be made.
    pub fn set_up(folder: Option<&Path>) -> Result<Self, SceneError> {
        let token = token()?;
        let temporary = folder.is_none();
        let folder = match folder {
            Some(folder) => folder.to_owned(),
            // Unguessable on a shared machine.
            None => std::env::temp_dir().join(format!("evenrow-demo-{}", random_name()?)),
        };
        make_private(&folder).map_err(|source| SceneError::Folder {
            folder: folder.clone(),
            source,
        })?;
        let scene = Self {
            folder,
            temporary,
            token,
        };
        scene.write("token", &format!("{}\n", scene.token))?;
        Ok(scene)
    }

    /// Writes the configuration and says where it is.
    ///
    /// # Errors
    /// When it cannot be written.
    pub fn configure(
        &self,
        broker: SocketAddr,
        page: SocketAddr,
        speed: f64,
    ) -> Result<PathBuf, SceneError> {
        let look_us = (LOOK_EVERY_US as f64 / speed) as i64;
        let text = configuration(&self.folder, broker, page, look_us.max(SHORTEST_LOOK_US));
        self.write("demo.toml", &text)
    }

    fn write(&self, name: &str, text: &str) -> Result<PathBuf, SceneError> {
        let file = self.folder.join(name);
        match fs::write(&file, text) {
            Ok(()) => Ok(file),
            Err(source) => Err(SceneError::File { file, source }),
        }
    }
}

impl Drop for Scene {
    fn drop(&mut self) {
        if self.temporary {
            // Nobody is left to be told; a temporary folder is the system's to clear in the end.
            let _ = fs::remove_dir_all(&self.folder);
        }
    }
}

/// Makes a folder that only its owner may read: the token lies in it.
fn make_private(folder: &Path) -> io::Result<()> {
    let mut builder = fs::DirBuilder::new();
    builder.recursive(true);
    #[cfg(unix)]
    std::os::unix::fs::DirBuilderExt::mode(&mut builder, 0o700);
    builder.create(folder)
}

/// 128 random bits as text.
fn token() -> Result<String, SceneError> {
    let mut bytes = [0_u8; 16];
    random(&mut bytes)?;
    Ok(hex(&bytes))
}

fn random_name() -> Result<String, SceneError> {
    let mut bytes = [0_u8; 6];
    random(&mut bytes)?;
    Ok(hex(&bytes))
}

/// The cryptographic library's generator: a guessable token would be none.
fn random(bytes: &mut [u8]) -> Result<(), SceneError> {
    let provider = rustls::crypto::ring::default_provider();
    let filled = provider.secure_random.fill(bytes);
    filled.map_err(|_| SceneError::NoRandomness)
}

fn hex(bytes: &[u8]) -> String {
    bytes.iter().map(|b| format!("{b:02x}")).collect()
}

/// The demo's bank.
pub const BANK: &str = "filler-2";

/// The configuration of the invented plant.
fn configuration(folder: &Path, broker: SocketAddr, page: SocketAddr, look_us: i64) -> String {
    let heads: Vec<String> = (0..HEADS).map(|h| quoted(&head_name(h))).collect();
    format!(
        r#"# An invented plant, as `evenrow demo` runs it.
[plant]
name = "Quayside"
time_zone = "Europe/Lisbon"

[broker]
url = "mqtt://{broker}"
client_id = "evenrow-quayside"
protocol = 4

[store]
folder = {store}
keep_days = 1

[web]
listen = "{page}"
token_file = {token}

[[bank]]
name = "{BANK}"
equipment = "filler 2"
characteristic = "net content"
unit = "g"
resolution = 0.1
target = {TARGET_G:.1}
declared = 500.0
limits = {{ lower = 485.0, upper = 515.0 }}
topic = "quayside/filler2/head/{{source}}/net"
payload = {{ form = "json", value = "/v", time = "/ts", cycle = "/n" }}
sources = [{heads}]
pairing = "cycle"
spans = [10, 40, 160, 640]
look_every = "{look_ms}ms"
margin = 0.8
false_calls = "1 per 90 days"
layout = "ring"
"#,
        store = quoted(&folder.join("store").to_string_lossy()),
        token = quoted(&folder.join("token").to_string_lossy()),
        heads = heads.join(", "),
        look_ms = look_us / 1_000,
    )
}

/// A TOML basic string; JSON's escapes are a subset of TOML's.
fn quoted(text: &str) -> String {
    serde_json::Value::from(text).to_string()
}

#[cfg(test)]
mod tests {
    use super::*;

    #[test]
    fn a_temporary_folder_is_private_and_goes_with_its_owner() {
        let scene = Scene::set_up(None).expect("a scene");
        let folder = scene.folder.clone();
        let written = fs::read_to_string(folder.join("token")).expect("a token");
        assert_eq!(written.trim(), scene.token);
        assert_eq!(scene.token.len(), 32);
        #[cfg(unix)]
        {
            use std::os::unix::fs::PermissionsExt;
            let mode = fs::metadata(&folder)
                .expect("a folder")
                .permissions()
                .mode();
            assert_eq!(mode & 0o077, 0, "{mode:o}");
        }
        assert_ne!(Scene::set_up(None).expect("another").token, scene.token);
        drop(scene);
        assert!(!folder.exists());
    }

    #[test]
    fn the_configuration_is_a_good_one_at_every_speed() {
        let scene = Scene::set_up(None).expect("a scene");
        let address = |port| SocketAddr::from(([127, 0, 0, 1], port));
        for speed in [0.1, 1.0, 3.0, 7.0, 20.0] {
            let file = scene.configure(address(1_883), address(7_310), speed);
            let read = crate::settings::load(&file.expect("a file"), []);
            if let Err(faults) = read {
                panic!(
                    "speed {speed}: {}",
                    faults.report(crate::settings::Ink::Plain)
                );
            }
        }
    }

    #[test]
    fn a_folder_that_was_asked_for_stays() {
        let home = tempfile::tempdir().expect("a folder");
        let asked = home.path().join("kept");
        drop(Scene::set_up(Some(&asked)).expect("a scene"));
        assert!(asked.join("token").exists());
    }
}
