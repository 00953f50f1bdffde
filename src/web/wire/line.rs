//! Line events.

use serde::{Deserialize, Serialize};
use utoipa::ToSchema;

use crate::model::{LineChange, LineEvent, Time, Value};

use super::finite;

/// What happened on the line.
#[derive(Clone, Copy, Debug, PartialEq, Eq, Serialize, Deserialize, ToSchema)]
#[serde(rename_all = "snake_case")]
pub enum LineKind {
    /// Another product; give `product`, and `target` and `declared` where they change.
    Changeover,
    /// A source was adjusted; give `source`, and `amount` where it is known.
    Adjustment,
    /// The line stopped: what arrives until it starts is not judged.
    Stop,
    /// The line runs again.
    Start,
    /// A source is out of use; give `source`.
    OutOfUse,
    /// A source is in use again; give `source`.
    BackInUse,
}

/// A line event to be entered.
#[derive(Clone, Debug, Deserialize, ToSchema)]
#[serde(deny_unknown_fields)]
pub struct LineEntryBody {
    /// The person's name.
    pub by: String,
    /// What happened.
    pub kind: LineKind,
    /// The source, for an adjustment and for use.
    #[serde(default)]
    pub source: Option<String>,
    /// By how much it was adjusted, in the unit.
    #[serde(default)]
    pub amount: Option<f64>,
    /// The product's code, for a changeover.
    #[serde(default)]
    pub product: Option<String>,
    /// What every source should give from now on.
    #[serde(default)]
    pub target: Option<f64>,
    /// The declared quantity from now on.
    #[serde(default)]
    pub declared: Option<f64>,
    /// Why, or what was found.
    #[serde(default)]
    pub reason: String,
}

impl LineEntryBody {
    /// The change that is meant.
    ///
    /// # Errors
    /// What is missing, superfluous or no number, in a sentence.
    pub fn change(&self) -> Result<LineChange, String> {
        self.check_fields()?;
        let source = || {
            let name = self.source.as_deref().map(str::trim);
            let name = name.filter(|s| !s.is_empty());
            name.map(Into::into)
                .ok_or_else(|| "`source` is missing: name the source".to_owned())
        };
        Ok(match self.kind {
            LineKind::Adjustment => LineChange::Adjustment {
                source: source()?,
                by: self.amount,
            },
            LineKind::OutOfUse => LineChange::OutOfUse { source: source()? },
            LineKind::BackInUse => LineChange::BackInUse { source: source()? },
            LineKind::Stop => LineChange::Stop,
            LineKind::Start => LineChange::Start,
            LineKind::Changeover => {
                let product = self.product.as_deref().map_or("", str::trim);
                if product.is_empty() {
                    return Err("`product` is missing: give the product's code".to_owned());
                }
                LineChange::Changeover {
                    product: product.into(),
                    target: number("target", self.target)?,
                    declared: number("declared", self.declared)?,
                }
            }
        })
    }

    /// A field that does not belong to the kind is a slip of the pen, and hides what was meant.
    fn check_fields(&self) -> Result<(), String> {
        let changes_product = self.kind == LineKind::Changeover;
        let has_source = !matches!(
            self.kind,
            LineKind::Changeover | LineKind::Stop | LineKind::Start
        );
        let given = [
            ("source", self.source.is_some(), has_source),
            (
                "amount",
                self.amount.is_some(),
                self.kind == LineKind::Adjustment,
            ),
            ("product", self.product.is_some(), changes_product),
            ("target", self.target.is_some(), changes_product),
            ("declared", self.declared.is_some(), changes_product),
        ];
        match given.iter().find(|(_, given, fits)| *given && !fits) {
            Some((field, ..)) => Err(format!("`{field}` does not belong to this kind")),
            None => Ok(()),
        }
    }
}

fn number(field: &str, x: Option<f64>) -> Result<Option<Value>, String> {
    let value = |x: f64| Value::parse(&x.to_string());
    x.map(value)
        .transpose()
        .map_err(|e| format!("`{field}` is no good number: {e}"))
}

/// A line event as it is kept.
#[derive(Clone, Debug, Serialize, ToSchema)]
pub struct LineEventBody {
    /// When it was entered.
    #[schema(value_type = String, format = DateTime)]
    pub at: Time,
    /// Who entered it.
    pub by: String,
    /// What happened.
    pub kind: &'static str,
    /// The source it is about.
    pub source: Option<String>,
    /// By how much it was adjusted, in the unit.
    pub amount: Option<f64>,
    /// The product's code.
    pub product: Option<String>,
    /// What every source should give since.
    pub target: Option<f64>,
    /// The declared quantity since.
    pub declared: Option<f64>,
    /// Why.
    pub reason: String,
}

impl From<&LineEvent> for LineEventBody {
    fn from(event: &LineEvent) -> Self {
        let LineEvent {
            at,
            by,
            change,
            reason,
        } = event;
        let mut body = Self {
            at: *at,
            by: by.to_string(),
            kind: change.word(),
            source: change.source().map(ToString::to_string),
            amount: None,
            product: None,
            target: None,
            declared: None,
            reason: reason.clone(),
        };
        match change {
            LineChange::Adjustment { by, .. } => body.amount = by.and_then(finite),
            LineChange::Changeover {
                product,
                target,
                declared,
            } => {
                body.product = Some(product.to_string());
                body.target = target.map(Value::to_f64);
                body.declared = declared.map(Value::to_f64);
            }
            _ => {}
        }
        body
    }
}
