//! Audio through an engine.
