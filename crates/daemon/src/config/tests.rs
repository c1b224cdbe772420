use super::*;

const LONG: &str = "0123456789abcdef0123456789abcdef";

#[test]
fn a_token_file_gives_each_token_its_scope() {
    let text = format!("# phones\nread {LONG}\n\noperate {LONG}x # the bench\n");
    let tokens = Tokens::parse(&text).unwrap();
    assert_eq!(tokens.scope_of(LONG), Some(Scope::Read));
    assert_eq!(tokens.scope_of(&format!("{LONG}x")), Some(Scope::Operate));
    assert_eq!(tokens.scope_of("0123"), None);
    assert_eq!(tokens.scope_of(""), None);
}

#[test]
fn a_token_file_that_protects_nothing_is_refused() {
    let refused = |text: &str| Tokens::parse(text).unwrap_err();
    assert_eq!(refused("# nothing\n"), TokensError::Empty);
    assert_eq!(refused("write abc"), TokensError::Line { line: 1 });
    assert_eq!(refused("\nread"), TokensError::Line { line: 2 });
    assert_eq!(
        refused("read short"),
        TokensError::Short { line: 1, chars: 5 }
    );
}

#[test]
fn tokens_are_never_shown() {
    let tokens = Tokens::parse(&format!("read {LONG}")).unwrap();
    assert_eq!(format!("{tokens:?}"), "1 tokens");
}
