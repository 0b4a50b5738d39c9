//! The mass balance of a tube: values worked by hand, identities, and roots held against references that bracket.

use proptest::prelude::*;
use rackside::binding::{Block, Bound, Isotherm, OneClass, Stuck, bound};
use rand::{RngExt, SeedableRng};
use rand_chacha::ChaCha8Rng;

const DURING: Stuck = Stuck::DuringIncubation;
const AFTER: Stuck = Stuck::AfterSeparation;

fn tube(kd: f64, sites: f64, ns: f64, stuck: Stuck, added: f64, block: Block) -> Bound {
    bound(
        &OneClass { kd, sites },
        ns,
        stuck,
        added,
        block,
        &mut [0.0; 2],
    )
}

#[track_caller]
fn close(got: f64, want: f64, relative: f64) {
    assert!(
        (got - want).abs() <= relative * want.abs(),
        "got {got}, want {want}"
    );
}

/// Computed in 50 digits: the smaller root of `B^2 - 3 B + 1`.
#[test]
fn all_one() {
    for stuck in [DURING, AFTER] {
        let b = tube(1.0, 1.0, 0.0, stuck, 1.0, Block::None);
        close(b.value, 0.3819660112501052, 1e-15);
        close(b.free, 0.6180339887498949, 1e-15);
    }
}

/// Whole numbers by design: `1.5 x 4 + 5 x 4 / 5 = 10`.
#[test]
fn half_of_the_free_label_sticks_during_incubation() {
    let b = tube(1.0, 5.0, 0.5, DURING, 10.0, Block::None);
    close(b.free, 4.0, 1e-15);
    close(b.value, 4.0 + 2.0, 1e-15);
}

/// The same tube where it sticks to the filter: `F^2 - 4 F - 10 = 0`, so `F = 2 + sqrt 14` (algebra).
#[test]
fn half_of_the_free_label_sticks_to_the_filter() {
    let b = tube(1.0, 5.0, 0.5, AFTER, 10.0, Block::None);
    close(b.free, 5.741657386773941, 1e-15);
    close(b.value, 10.0 - b.free + 0.5 * b.free, 1e-15);
}

/// Half the sites are filled where free is Kd, and `log10(theta / (1 - theta))` crosses zero there with slope one
/// (common practice, and algebra).
#[test]
fn half_saturation_is_at_kd() {
    for (kd, sites) in [(0.5, 0.02), (3.0, 40.0), (1e-3, 1e2)] {
        let law = OneClass { kd, sites };
        let b = tube(kd, sites, 0.0, DURING, kd + sites / 2.0, Block::None);
        close(b.free, kd, 1e-13);
        close(b.value, sites / 2.0, 1e-13);
        let logit = |free: f64| {
            let theta = law.specific(free) / sites;
            (theta / (1.0 - theta)).log10()
        };
        assert!(logit(kd).abs() < 1e-15);
        close(logit(10.0 * kd) - logit(kd), 1.0, 1e-13);
    }
}

/// In bound/free coordinates one class is a straight line of slope `-1/Kd` that meets the bound axis at the sites (algebra),
/// whatever the depletion, if free is free and not added.
#[test]
fn bound_over_free_is_a_line() {
    for (kd, sites) in [(0.5, 0.02), (0.5, 0.5), (0.1, 20.0)] {
        let points: Vec<(f64, f64)> = [0.05, 0.2, 1.0, 4.0, 30.0]
            .iter()
            .map(|l| tube(kd, sites, 0.0, AFTER, *l, Block::None))
            .map(|b| (b.value, b.value / b.free))
            .collect();
        let first = points[0];
        for p in &points[1..] {
            let slope = (p.1 - first.1) / (p.0 - first.0);
            close(slope, -1.0 / kd, 1e-10);
            close(first.0 - first.1 / slope, sites, 1e-10);
        }
    }
}

/// Taken for free, the label added that fills half the sites is `Kd + R/2` (algebra): what such an analysis would call Kd.
#[test]
fn added_taken_for_free_gives_an_apparent_kd() {
    for (kd, sites) in [(0.5, 0.215), (0.5, 5.0), (2.0, 0.01)] {
        let bound_at = |added| tube(kd, sites, 0.0, AFTER, added, Block::None).value;
        // The added concentration that binds half the sites, by bisection.
        let (mut low, mut high) = (0.0, 1e3 * (kd + sites));
        for _ in 0..200 {
            let mid = 0.5 * (low + high);
            if bound_at(mid) < sites / 2.0 {
                low = mid;
            } else {
                high = mid;
            }
        }
        close(low, kd + sites / 2.0, 1e-13);
    }
}

/// Specific binding left in a blocked tube over that in its total tube, sites scarce: `(Kd + F) / (Kd + F + C)`.
#[test]
fn a_hundredfold_block_leaves_a_tenth_at_ten_kd() {
    let (kd, sites) = (0.5, 1e-9);
    let c = 100.0 * kd;
    for (free, exact, percent) in [
        (0.1, 1.1 / 101.1, "1.1"),
        (1.0, 2.0 / 102.0, "2.0"),
        (10.0, 11.0 / 111.0, "9.9"),
    ] {
        let at = |block| tube(kd, sites, 0.0, DURING, free * kd, block).value;
        // The same molecule unlabelled, and another one that binds as well.
        for block in [Block::SameLigand(c), Block::Competitor(1.0 + c / kd)] {
            let left = at(block) / at(Block::None);
            close(left, exact, 1e-7);
            assert_eq!(format!("{:.1}", 100.0 * left), percent);
        }
        assert_eq!(at(Block::Full), 0.0);
    }
}

/// A number of any size between the powers of ten.
fn magnitude(low: f64, high: f64) -> impl Strategy<Value = f64> {
    (low..high).prop_map(|e| 10f64.powf(e))
}

proptest! {
    #![proptest_config(ProptestConfig { cases: 2000, failure_persistence: None, ..ProptestConfig::default() })]

    /// Total less fully blocked, at the same label added, is not specific binding but `S / (1 + ns)` of it where label sticks
    /// during incubation: the blocked tube has more free label to stick. `S` is that of the total tube, at its free label.
    ///
    /// From the balance: `N = ns LT / (1 + ns) = ns F + ns S / (1 + ns)`, and `T = S + ns F`.
    #[test]
    fn total_less_blocked_stuck_during_incubation(
        kd in magnitude(-12.0, 3.0), sites in magnitude(-12.0, 3.0),
        ns in magnitude(-9.0, 2.0), added in magnitude(-12.0, 3.0),
    ) {
        let total = tube(kd, sites, ns, DURING, added, Block::None);
        let blocked = tube(kd, sites, ns, DURING, added, Block::Full);
        let specific = OneClass { kd, sites }.specific(total.free);
        let off = (total.value - blocked.value - specific / (1.0 + ns)).abs();
        prop_assert!(off <= 4e-15 * total.value, "off {off:e}, total {}", total.value);
    }

    /// Stuck after separation the difference is `S (1 - ns)`: `N = ns LT = ns (F + S)`.
    #[test]
    fn total_less_blocked_stuck_after_separation(
        kd in magnitude(-12.0, 3.0), sites in magnitude(-12.0, 3.0),
        ns in magnitude(-9.0, 0.0), added in magnitude(-12.0, 3.0),
    ) {
        let total = tube(kd, sites, ns, AFTER, added, Block::None);
        let blocked = tube(kd, sites, ns, AFTER, added, Block::Full);
        let specific = OneClass { kd, sites }.specific(total.free);
        let off = (total.value - blocked.value - specific * (1.0 - ns)).abs();
        prop_assert!(off <= 4e-15 * total.value, "off {off:e}, total {}", total.value);
    }

    /// What is added is free, bound to sites, or stuck to the preparation; nothing is lost.
    #[test]
    fn label_adds_up(
        kd in magnitude(-12.0, 3.0), sites in magnitude(-12.0, 3.0),
        ns in magnitude(-9.0, 2.0), added in magnitude(-12.0, 3.0), c in magnitude(-3.0, 6.0),
    ) {
        for block in [Block::None, Block::SameLigand(c), Block::Competitor(1.0 + c), Block::Full] {
            let b = tube(kd, sites, ns, DURING, added, block);
            prop_assert!(b.value >= 0.0 && b.free >= 0.0);
            prop_assert!((b.free + b.value - added).abs() <= 4e-15 * added, "{block:?} {b:?}");
        }
    }

    /// Full block: label is free or stuck, whatever the sites.
    #[test]
    fn full_block_leaves_nonspecific_alone(
        kd in magnitude(-12.0, 3.0), sites in magnitude(-12.0, 3.0),
        ns in magnitude(-9.0, 2.0), added in magnitude(-12.0, 3.0),
    ) {
        let during = tube(kd, sites, ns, DURING, added, Block::Full);
        prop_assert!((during.value - ns * added / (1.0 + ns)).abs() <= 1e-15 * during.value);
        let after = tube(kd, sites, ns, AFTER, added, Block::Full);
        prop_assert!((after.value - ns * added).abs() <= 1e-15 * after.value);
        // The limit of ever more of the unlabelled form and of an ever better competitor.
        for (stuck, full) in [(DURING, during), (AFTER, after)] {
            for block in [Block::SameLigand(1e30), Block::Competitor(1e60)] {
                let b = tube(kd, sites, ns, stuck, added, block);
                prop_assert!((b.value - full.value).abs() <= 1e-12 * full.value, "{block:?}");
            }
        }
    }
}

/// The sum of two numbers of double length (Knuth's two-sum and Dekker's product, from memory): about 31 digits.
#[derive(Clone, Copy)]
struct Double(f64, f64);

impl Double {
    fn sum(a: f64, b: f64) -> Double {
        let s = a + b;
        let v = s - a;
        Double(s, (a - (s - v)) + (b - v))
    }

    fn product(a: f64, b: f64) -> Double {
        let p = a * b;
        Double(p, a.mul_add(b, -p))
    }

    fn plus(self, other: Double) -> Double {
        let (high, low) = (Double::sum(self.0, other.0), Double::sum(self.1, other.1));
        let first = Double::sum(high.0, high.1 + low.0);
        Double::sum(first.0, first.1 + low.1)
    }

    fn times(self, b: f64) -> Double {
        let p = Double::product(self.0, b);
        Double::sum(p.0, self.1.mul_add(b, p.1))
    }
}

/// The two neighbouring numbers between which the free label lies, by bisection on
/// `(a F - LT) (Kd + F) + R F` in double length.
fn bracket(kd: f64, sites: f64, total: f64, a: f64) -> (f64, f64) {
    let short = |free: f64| {
        let sum = Double::sum(kd, free);
        let missing = Double::product(a, free).plus(Double(-total, 0.0));
        let product = sum
            .times(missing.0)
            .plus(sum.times(missing.1))
            .plus(Double::product(sites, free));
        product.0 < 0.0
    };
    // Positive numbers are ordered as their bits are.
    let (mut low, mut high) = (0u64, (2.0 * total / a).to_bits());
    assert!(short(0.0) && !short(f64::from_bits(high)));
    while high - low > 1 {
        let mid = low + (high - low) / 2;
        if short(f64::from_bits(mid)) {
            low = mid;
        } else {
            high = mid;
        }
    }
    (f64::from_bits(low), f64::from_bits(high))
}

/// How far `free` is outside the bracket, relative to it.
fn outside(free: f64, (low, high): (f64, f64)) -> f64 {
    f64::max(low - free, free - high).max(0.0) / high
}

/// Free label against a reference that brackets, over fifteen powers of ten in every parameter, half of the cases with the label
/// close to the sites, where the textbook root of the quadratic loses all its digits.
#[test]
fn free_label_to_the_last_digits() {
    let mut rng = ChaCha8Rng::seed_from_u64(17);
    let mut size = |low: f64, high: f64| 10f64.powf(rng.random_range(low..high));
    let (mut worst, mut worst_textbook) = (0.0f64, 0.0f64);
    for case in 0..20_000 {
        let (kd, sites, ns) = (size(-12.0, 3.0), size(-12.0, 3.0), size(-12.0, 3.0));
        let total = match case % 4 {
            0 => sites * (1.0 + size(-16.0, -1.0)),
            1 => sites * (1.0 - size(-16.0, -1.0)),
            _ => size(-12.0, 3.0),
        };
        let a = if case % 3 == 0 { 1.0 } else { 1.0 + ns };
        let truth = bracket(kd, sites, total, a);
        let free = OneClass { kd, sites }.free(total, a);
        worst = worst.max(outside(free, truth));
        let beta = a * kd + sites - total;
        let textbook = ((beta * beta + 4.0 * a * kd * total).sqrt() - beta) / (2.0 * a);
        worst_textbook = worst_textbook.max(outside(textbook, truth));
    }
    assert!(worst <= 1e-15, "{worst:e}");
    // The bound can be missed: the textbook root misses it by everything.
    assert!(worst_textbook > 0.1, "{worst_textbook:e}");
}

/// The root of an increasing function between two numbers, to the last bit.
fn root(mut low: f64, mut high: f64, f: impl Fn(f64) -> f64) -> f64 {
    loop {
        let mid = 0.5 * (low + high);
        if mid <= low || mid >= high {
            return mid;
        }
        if f(mid) < 0.0 {
            low = mid;
        } else {
            high = mid;
        }
    }
}

/// Isotopic dilution against the problem as it stands: label and its unlabelled form compete for the same sites and both
/// stick, two unknown free concentrations in two balances, each solved by bracketing inside the other.
#[test]
fn isotopic_dilution_is_competition_of_two_ligands() {
    let mut rng = ChaCha8Rng::seed_from_u64(18);
    let mut size = |low: f64, high: f64| 10f64.powf(rng.random_range(low..high));
    for _ in 0..2000 {
        let (kd, sites, ns) = (size(-3.0, 3.0), size(-3.0, 3.0), size(-6.0, 0.5));
        let (added, c) = (size(-3.0, 3.0), size(-2.0, 5.0));
        for (stuck, a) in [(DURING, 1.0 + ns), (AFTER, 1.0)] {
            let unlabelled = |label: f64| {
                root(0.0, c / a, |free| {
                    a * free + sites * free / (kd + label + free) - c
                })
            };
            let label = root(0.0, added / a, |free| {
                a * free + sites * free / (kd + free + unlabelled(free)) - added
            });
            let specific = sites * label / (kd + label + unlabelled(label));
            let got = tube(kd, sites, ns, stuck, added, Block::SameLigand(c));
            close(got.value, specific + ns * label, 1e-11);
        }
    }
}

/// A competitor that is not used up, against the mass action of free sites: `R = Rf (1 + F/Kd + C/Ki)`, solved for
/// the free sites by bracketing.
#[test]
fn a_competitor_takes_its_share_of_free_sites() {
    let mut rng = ChaCha8Rng::seed_from_u64(19);
    let mut size = |low: f64, high: f64| 10f64.powf(rng.random_range(low..high));
    for _ in 0..2000 {
        let (kd, sites, ns) = (size(-3.0, 3.0), size(-3.0, 3.0), size(-6.0, 0.5));
        let (added, c, ki) = (size(-3.0, 3.0), size(-2.0, 5.0), size(-3.0, 3.0));
        for (stuck, a) in [(DURING, 1.0 + ns), (AFTER, 1.0)] {
            let free = |free_sites: f64| added / (a + free_sites / kd);
            let free_sites = root(0.0, sites, |rf| rf * (1.0 + free(rf) / kd + c / ki) - sites);
            let label = free(free_sites);
            let got = tube(kd, sites, ns, stuck, added, Block::Competitor(1.0 + c / ki));
            close(got.value, free_sites * label / kd + ns * label, 1e-11);
        }
    }
}
