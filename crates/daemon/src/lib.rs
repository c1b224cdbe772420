//! The daemon: one worker per sink, HTTP/JSON, event stream, metrics, supervision.
