//! The frozen form of lines.
