use axum::http::HeaderValue;

use super::*;

fn best(accept: &'static str) -> Result<Media, Code> {
    let mut headers = HeaderMap::new();
    headers.insert(header::ACCEPT, HeaderValue::from_static(accept));
    accepted(&headers).map_err(|problem| problem.code)
}

#[test]
fn the_best_of_what_is_accepted_is_given() {
    assert_eq!(accepted(&HeaderMap::new()).unwrap(), Media::Json);
    assert_eq!(best("*/*"), Ok(Media::Json));
    assert_eq!(best("text/csv"), Ok(Media::Csv));
    assert_eq!(
        best("text/csv;q=0.5, application/json;q=0.4"),
        Ok(Media::Csv)
    );
    assert_eq!(best(columnar::MEDIA_TYPE), Ok(Media::Parquet));
    assert_eq!(best("text/html, */*;q=0.1"), Ok(Media::Json));
    assert_eq!(best("text/html"), Err(Code::NotAcceptable));
    assert_eq!(best("text/csv;q=0"), Err(Code::NotAcceptable));
}
