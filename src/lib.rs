//! The daemon around the engine.
