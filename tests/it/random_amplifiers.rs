//! Two hundred random amplifiers: modes, determinant and off-network must agree on every one. The
//! netlists are also written to a folder, for the independent reference in `tests/reference`.

use super::amplifiers;
use super::load::Loaded;
use squeg_analyzer::host::Verdict;
use std::path::Path;

#[test]
fn counts_agree_on_two_hundred_random_amplifiers() {
    let folder = Path::new(env!("CARGO_TARGET_TMPDIR")).join("random-amplifiers");
    std::fs::create_dir_all(&folder).expect("a folder for the netlists");
    let (mut unstable, mut largest) = (0, 0);
    for seed in 0..200 {
        let text = amplifiers::netlist(seed);
        let path = folder.join(format!("amp{seed:03}.cir"));
        std::fs::write(path, &text).expect("a netlist can be written");
        let loaded = Loaded::text(&text);
        let block = &loaded.screening.blocks[0];
        let context = format!("seed {seed}: {:?} {:?}", block.verdict, block.why);
        assert!(
            matches!(block.verdict, Verdict::Stable | Verdict::Unstable),
            "{context}"
        );
        let z = block.unstable_modes.expect("modes are known") as i64;
        let turns = block.determinant.encirclements.expect("counted");
        let p = block.determinant.off_network_unstable.expect("counted") as i64;
        assert_eq!(z, turns + p, "{context}");
        let growing = block.modes.iter().filter(|mode| mode.growth_per_s > 0.0);
        let listed: i64 = growing.map(|mode| if mode.hz > 0.0 { 2 } else { 1 }).sum();
        assert_eq!(listed, z, "{context}: every growing mode is listed");
        let named = |mode: &squeg_analyzer::host::ModeReport| !mode.parts.is_empty();
        assert!(block.modes.iter().all(named), "{context}: parts take part");
        unstable += usize::from(z > 0);
        largest = largest.max(block.unknowns);
    }
    assert!(unstable >= 60, "{unstable} are unstable");
    assert!((150..=200).contains(&largest), "up to {largest} unknowns");
}

#[test]
fn the_reference_amplifiers_are_screened() {
    let block = Loaded::text(&amplifiers::amplifier_63()).screening.blocks[0].clone();
    assert_eq!((block.unknowns, block.verdict), (63, Verdict::Stable));
    let block = Loaded::text(&amplifiers::amplifier_200(0)).screening.blocks[0].clone();
    assert!(block.unknowns > 180, "{} unknowns", block.unknowns);
}
