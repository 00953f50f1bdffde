//! The newest measurements of each source, and how values of different sources belong together.
