//! Published values beside their sources: one file a subject in `tests/`.
