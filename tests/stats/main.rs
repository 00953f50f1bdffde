//! Properties of `evenrow::stats`: what must hold for any data, and what must hold by chance alone.

mod degenerate;
mod followups;
mod invariance;
mod uniformity;
