use sink::bench::Bench;

use super::*;

#[test]
fn smoke() {
    let bench = Bench::from_toml(include_str!("../../../sink/src/bench/weir.toml")).unwrap();
    let left = bench.sink("left").unwrap();
    let text = include_str!("../../../../sequences/capacity-0.2-it.json");
    match compile(text, left, &Files::new(), &Options::default()) {
        Ok(compiled) => println!("{:#?}\n{}", compiled.plan, compiled.warnings),
        Err(refused) => panic!("{refused}"),
    }
}
