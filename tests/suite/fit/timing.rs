//! How long a fit takes. Prints; run with `--ignored --nocapture`.

use std::time::Instant;

use qsheaf::fit;

#[test]
#[ignore = "prints times"]
fn fits() {
    for part in super::demo("transistors.yaml").into_iter().chain(super::demo("diodes.yaml")) {
        let once = |_| {
            let begin = Instant::now();
            assert!(fit::fit(&part).is_ok());
            begin.elapsed().as_nanos()
        };
        let best = (0..50).map(once).min().unwrap_or(0);
        println!("{}: {} us", part.name, best / 1000);
    }
}
