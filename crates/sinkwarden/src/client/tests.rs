//! Which token a file gives.

use super::token_of;

#[test]
fn a_token_alone_is_taken() {
    assert_eq!(token_of("abc123\n").as_deref(), Some("abc123"));
}

#[test]
fn of_the_daemons_own_file_the_operate_line_wins() {
    let text = "# who may do what\nread aaaa\noperate bbbb # the bench\n";
    assert_eq!(token_of(text).as_deref(), Some("bbbb"));
    assert_eq!(token_of("read aaaa\n").as_deref(), Some("aaaa"));
}

#[test]
fn a_file_without_a_token_gives_none() {
    assert_eq!(token_of("# nothing\n\n"), None);
}
