//! Forms of payload in which things are found by name: metrics, fields and records.

use crate::settings::section::{Field, Spot};
use crate::settings::written_payload::{WrittenAt, WrittenPayload, WrittenSourceAt};
use crate::settings::{NameTemplate, OpcUaForm, PayloadForm, Rebirth, SenMlForm, SparkplugForm};

use super::payload::Maker;

/// A message waits this long for one before it when nothing else is said.
const REORDER_US: i64 = 5 * crate::model::US_PER_S;
/// Longer, and a node that lost a message would stand still for as long.
const LONGEST_REORDER_US: i64 = 600 * crate::model::US_PER_S;

impl Maker<'_, '_> {
    pub(super) fn sparkplug(&mut self, written: WrittenPayload) -> Option<PayloadForm> {
        let WrittenPayload {
            value,
            cycle,
            reorder,
            rebirth,
            ..
        } = written;
        self.sparkplug_topic();
        let metric = self.template(value);
        let cycle = self.name(cycle, "cycle")?;
        let bounds = 0..=LONGEST_REORDER_US;
        let reorder_us = self
            .check
            .duration_us(reorder, "reorder", bounds)
            .unwrap_or(REORDER_US);
        let asks = rebirth.given().is_some_and(|spot| spot.value);
        let rebirth = if asks { Rebirth::Ask } else { Rebirth::Wait };
        Some(PayloadForm::Sparkplug(SparkplugForm {
            metric: metric?,
            cycle,
            reorder_us,
            rebirth,
        }))
    }

    /// `spBv1.0/GROUP/+/NODE`, with a device or without.
    fn sparkplug_topic(&mut self) {
        let Some((topic, place)) = self.around.topic else {
            return;
        };
        let levels = &topic.levels;
        let good = (4..=5).contains(&levels.len())
            && levels[0] == "spBv1.0"
            && levels[2] == "+"
            && !levels.iter().any(|level| level == "#");
        if !good {
            let message = "`topic` is none of a Sparkplug B edge node or device";
            let hint = "write spBv1.0/GROUP/+/NODE for the metrics of a node, or \
                        spBv1.0/GROUP/+/NODE/DEVICE for those of its devices; + stands for the kind of message";
            self.check.add(place, message, hint);
        }
    }

    pub(super) fn opc_ua(&mut self, written: WrittenPayload) -> Option<PayloadForm> {
        let WrittenPayload {
            value,
            source,
            cycle,
            writer,
            ..
        } = written;
        let field = self.template(value);
        let source = match source {
            Field::Given(Spot {
                value: WrittenSourceAt::Counted { place, .. },
                ..
            }) => {
                let message = "`source` must be the name of a field";
                self.check
                    .add(&place, message, "for example `source = \"Head\"`");
                return None;
            }
            Field::Given(Spot {
                value: WrittenSourceAt::At(at),
                place,
            }) => Field::Given(Spot { value: at, place }),
            Field::Absent => Field::Absent,
            Field::Faulty => Field::Faulty,
        };
        let source = self.name(source, "source")?;
        let cycle = self.name(cycle, "cycle")?;
        let writer = self
            .check
            .name(writer, "writer")
            .map(|name| name.to_string());
        Some(PayloadForm::OpcUaJson(OpcUaForm {
            field: field?,
            source,
            cycle,
            writer,
        }))
    }

    pub(super) fn senml(&mut self, written: WrittenPayload) -> Option<PayloadForm> {
        let WrittenPayload {
            value,
            cycle,
            unit_written,
            ..
        } = written;
        let name = self.template(value);
        let cycle = self.name(cycle, "cycle")?;
        let unit = self.unit_words(unit_written);
        Some(PayloadForm::SenMl(SenMlForm {
            name: name?,
            cycle,
            unit,
        }))
    }

    /// A name in which {source} may stand.
    fn template(&mut self, value: Field<WrittenAt>) -> Option<NameTemplate> {
        let value = self.check.required(value, "value");
        let place = value.peek().map(|spot| spot.place.clone())?;
        let name = self.name(value, "value")??;
        let template = NameTemplate::new(&name);
        if template.is_none() {
            let message = "`value` has {source} twice";
            self.check.add(
                &place,
                message,
                "write it once, where the name of the source stands",
            );
        }
        template
    }

    /// A name; the outer `None` when it is faulty, the inner when it is absent.
    fn name(&mut self, field: Field<WrittenAt>, key: &str) -> Option<Option<String>> {
        let Spot { value, place } = match field {
            Field::Given(spot) => spot,
            Field::Absent => return Some(None),
            Field::Faulty => return None,
        };
        match value {
            WrittenAt::Text(name) if !name.trim().is_empty() => Some(Some(name)),
            _ => {
                let message = format!("`{key}` must be a name");
                self.check.add(
                    &place,
                    message,
                    "for example `value = \"Head {source}/Net\"`",
                );
                None
            }
        }
    }
}
