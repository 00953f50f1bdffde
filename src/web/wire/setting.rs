//! Settings.

use serde::Serialize;
use utoipa::ToSchema;

use crate::settings::{Origin, Setting};

/// One key of the settings as used.
#[derive(Debug, Serialize, ToSchema)]
pub struct SettingBody {
    /// `plant`, `broker`, `store`, `web`, or `bank.` with the bank's name.
    pub section: String,
    /// The key, with a point before keys of a table inside.
    pub key: String,
    /// The value as used; empty where none is set.
    pub value: String,
    /// `file`, `variable` or `default`.
    pub from: String,
    /// The line of the file.
    pub line: Option<usize>,
    /// The environment variable.
    pub variable: Option<String>,
}

impl From<Setting> for SettingBody {
    fn from(setting: Setting) -> Self {
        let Setting {
            section,
            key,
            value,
            origin,
        } = setting;
        let (from, line, variable) = match origin {
            Origin::File { line } => ("file", Some(line), None),
            Origin::Variable(name) => ("variable", None, Some(name)),
            Origin::Default => ("default", None, None),
        };
        Self {
            section,
            key: key.to_owned(),
            value,
            from: from.to_owned(),
            line,
            variable,
        }
    }
}
