//! Sparkplug B on the wire: protobuf messages with the field numbers of the specification (Eclipse
//! Sparkplug 3.0.0, §6.4.1), those fields only that are read here; protobuf skips the others.

use prost::Message;

/// A payload.
#[derive(Clone, PartialEq, Message)]
pub struct Payload {
    /// When it was sent, in milliseconds since 1970.
    #[prost(uint64, optional, tag = "1")]
    pub timestamp: Option<u64>,
    /// What it carries.
    #[prost(message, repeated, tag = "2")]
    pub metrics: Vec<Metric>,
    /// Its place in the sequence of the edge node, 0 to 255.
    #[prost(uint64, optional, tag = "3")]
    pub seq: Option<u64>,
}

/// A metric.
#[derive(Clone, PartialEq, Message)]
pub struct Metric {
    /// Its name; data may leave it out where a birth gave it an alias.
    #[prost(string, optional, tag = "1")]
    pub name: Option<String>,
    /// Its number in the place of the name.
    #[prost(uint64, optional, tag = "2")]
    pub alias: Option<u64>,
    /// When it was taken, in milliseconds since 1970.
    #[prost(uint64, optional, tag = "3")]
    pub timestamp: Option<u64>,
    /// The type of its value.
    #[prost(uint32, optional, tag = "4")]
    pub datatype: Option<u32>,
    /// Whether it was taken before what is sent live.
    #[prost(bool, optional, tag = "5")]
    pub is_historical: Option<bool>,
    /// Whether it has no value.
    #[prost(bool, optional, tag = "7")]
    pub is_null: Option<bool>,
    /// What else is said of it.
    #[prost(message, optional, tag = "9")]
    pub properties: Option<PropertySet>,
    /// Its value, unless of a kind that is not read here.
    #[prost(oneof = "Given", tags = "10, 11, 12, 13, 14, 15")]
    pub value: Option<Given>,
}

/// A value.
#[derive(Clone, PartialEq, prost::Oneof)]
pub enum Given {
    /// Whole numbers to 32 bits; negative ones in two's complement.
    #[prost(uint32, tag = "10")]
    Int(u32),
    /// Whole numbers of 64 bits and times.
    #[prost(uint64, tag = "11")]
    Long(u64),
    /// Single precision.
    #[prost(float, tag = "12")]
    Float(f32),
    /// Double precision.
    #[prost(double, tag = "13")]
    Double(f64),
    /// True or false.
    #[prost(bool, tag = "14")]
    Boolean(bool),
    /// Text.
    #[prost(string, tag = "15")]
    Text(String),
}

/// Properties, names and values in two lists.
#[derive(Clone, PartialEq, Message)]
pub struct PropertySet {
    /// The names.
    #[prost(string, repeated, tag = "1")]
    pub keys: Vec<String>,
    /// The values.
    #[prost(message, repeated, tag = "2")]
    pub values: Vec<Property>,
}

/// A property.
#[derive(Clone, PartialEq, Message)]
pub struct Property {
    /// A whole number; other types are not read here.
    #[prost(uint32, optional, tag = "3")]
    pub int_value: Option<u32>,
}
