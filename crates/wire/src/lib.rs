//! The line protocol: messages, encoding, checksum and an incremental decoder.
