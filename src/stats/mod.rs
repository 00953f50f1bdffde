//! Statistics for comparing groups: plain `f64` in, plain structs out. Knows nothing of a plant.

pub mod dist;
