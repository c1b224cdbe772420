//! What holds for the crate as a whole: the published documents, and plans under random change.

mod documents;
mod properties;
