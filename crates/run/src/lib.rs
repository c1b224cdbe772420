//! One run end to end, without I/O of its own: sequencer, session and record held together; rehearsal in virtual time.
