use crate::desk::Desk;

#[test]
fn the_first_page_is_there_and_everything_it_names_is_too() {
    let desk = Desk::open(1);
    let page = desk.get("/");
    assert_eq!(page.status, 200);
    assert!(page.media.starts_with("text/html"), "{}", page.media);
    // Whatever it names, be it the full page or the plain one.
    let named = page
        .text
        .split('"')
        .filter(|text| text.starts_with("page/") || text.starts_with("/plain."));
    let mut count = 0;
    for path in named {
        let path = format!("/{}", path.trim_start_matches('/'));
        assert_eq!(desk.get_bytes(&path), 200, "{path}");
        count += 1;
    }
    assert!(count >= 2, "{}", page.text);
    assert_eq!(desk.get("/page/nothing.js").code(), "no-such-resource");
}

#[test]
fn the_plain_page_says_how_to_get_the_full_one() {
    let desk = Desk::open(1);
    let page = desk.get("/plain");
    assert!(page.text.contains("cargo xtask page"), "{}", page.text);
    assert!(desk.get("/plain.js").media.starts_with("text/javascript"));
    assert!(desk.get("/plain.css").media.starts_with("text/css"));
}
