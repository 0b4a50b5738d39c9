//! Two classes of sites and Hill's isotherm in a tube: identities, values worked by hand, and free label held against a
//! reference that brackets in double length.

use proptest::prelude::*;
use rackside::binding::{Block, Bound, Hill, Isotherm, OneClass, Stuck, TwoClasses, bound};
use rand::{RngExt, SeedableRng};
use rand_chacha::ChaCha8Rng;

const DURING: Stuck = Stuck::DuringIncubation;
const AFTER: Stuck = Stuck::AfterSeparation;

fn tube<I: Isotherm>(law: &I, ns: f64, stuck: Stuck, added: f64, block: Block) -> Bound {
    bound(law, ns, stuck, added, block, &mut [0.0; 4])
}

fn two([k1, r1, k2, r2]: [f64; 4]) -> TwoClasses {
    TwoClasses {
        first: OneClass { kd: k1, sites: r1 },
        second: OneClass { kd: k2, sites: r2 },
    }
}

fn hill(kh: f64, sites: f64, n: f64) -> Hill {
    Hill { kh, sites, n }
}

#[track_caller]
fn close(got: f64, want: f64, relative: f64) {
    assert!(
        (got - want).abs() <= relative * want.abs(),
        "got {got}, want {want}"
    );
}

/// Whole numbers by design: of 10 nM 3 are free, the tight class holds `4 x 3 / (1 + 3) = 3` and the loose one
/// `6 x 3 / (6 + 3) = 2`, and `2/3` of what is free sticks.
#[test]
fn two_classes_by_hand() {
    let law = two([1.0, 4.0, 6.0, 6.0]);
    let b = tube(&law, 2.0 / 3.0, DURING, 10.0, Block::None);
    close(b.free, 3.0, 1e-15);
    close(b.value, 7.0, 1e-15);
    // On the filter it was free in the tube: 8 nM are enough for the same free label.
    let b = tube(&law, 2.0 / 3.0, AFTER, 8.0, Block::None);
    close(b.free, 3.0, 1e-15);
    close(b.value, 7.0, 1e-15);
    // The unlabelled form is the same ligand: 1 nM of label and 9 nM of it share what 10 nM would bind.
    let b = tube(&law, 2.0 / 3.0, DURING, 1.0, Block::SameLigand(9.0));
    close(b.free, 0.3, 1e-15);
    close(b.value, 0.7, 1e-15);
    // A competitor that makes both constants seven times as large: `4 x 5 / (7 + 5) + 6 x 5 / (42 + 5) + 5`.
    let b = tube(
        &law,
        0.0,
        AFTER,
        5.0 / 3.0 + 30.0 / 47.0 + 5.0,
        Block::Competitor(7.0),
    );
    close(b.free, 5.0, 1e-15);
}

/// Whole numbers by design: at `n = 2` and `F = 2 Kh` four fifths of the sites are taken.
#[test]
fn hill_by_hand() {
    let law = hill(1.5, 5.0, 2.0);
    let b = tube(&law, 0.5, DURING, 1.5 * 3.0 + 4.0, Block::None);
    close(b.free, 3.0, 1e-15);
    close(b.value, 5.5, 1e-15);
    let b = tube(&law, 0.5, AFTER, 7.0, Block::None);
    close(b.free, 3.0, 1e-15);
    close(b.value, 5.5, 1e-15);
}

/// Occupancy at `F = 2 Kh`, `n = 1.6`, computed independently; its logit is `n log10(F / Kh)` (Hill 1910, J Physiol 40: iv;
/// from memory).
#[test]
fn hill_occupancy() {
    let taken = hill(1.0, 1.0, 1.6).specific(2.0);
    assert!((taken - 0.7519492530).abs() < 5e-11, "{taken}");
    let logit = (taken / (1.0 - taken)).log10();
    assert!((logit - 0.4816479931).abs() < 5e-11, "{logit}");
    close(logit, 1.6 * 2f64.log10(), 1e-14);
    // The logit is a line of slope n whatever the sites.
    for n in [0.1, 0.7, 1.0, 1.6, 10.0] {
        let law = hill(0.3, 0.02, n);
        assert_eq!(law.specific(0.3), 0.01);
        let logit = |free: f64| {
            let taken = law.specific(free);
            (taken / (law.sites - taken)).log10()
        };
        close(logit(0.3 * 1.2) / 1.2f64.log10(), n, 1e-13);
    }
}

/// A number of any size between the powers of ten.
fn magnitude(low: f64, high: f64) -> impl Strategy<Value = f64> {
    (low..high).prop_map(|e| 10f64.powf(e))
}

fn any_stuck() -> impl Strategy<Value = Stuck> {
    prop_oneof![Just(DURING), Just(AFTER)]
}

fn any_block() -> impl Strategy<Value = Block> {
    prop_oneof![
        Just(Block::None),
        magnitude(-3.0, 6.0).prop_map(Block::SameLigand),
        magnitude(-3.0, 6.0).prop_map(|c| Block::Competitor(1.0 + c)),
        Just(Block::Full),
    ]
}

/// All three laws of comparable parameters.
#[derive(Debug, Clone, Copy)]
struct Laws {
    one: OneClass,
    two: TwoClasses,
    hill: Hill,
}

fn any_laws() -> impl Strategy<Value = Laws> {
    let size = || magnitude(-6.0, 3.0);
    (size(), size(), size(), size(), magnitude(-1.0, 1.0)).prop_map(|(k1, r1, k2, r2, n)| Laws {
        one: OneClass { kd: k1, sites: r1 },
        two: two([k1, r1, k2, r2]),
        hill: hill(k1, r1, n),
    })
}

/// Total less fully blocked, over what sites hold at the total tube's free label, and how much of the total it is off.
fn difference<I: Isotherm>(law: &I, ns: f64, stuck: Stuck, added: f64) -> f64 {
    let total = tube(law, ns, stuck, added, Block::None);
    let blocked = tube(law, ns, stuck, added, Block::Full);
    let share = match stuck {
        DURING => 1.0 / (1.0 + ns),
        AFTER => 1.0 - ns,
    };
    let want = share * law.specific(total.free);
    (total.value - blocked.value - want).abs() / total.value
}

/// What is free, bound to sites and stuck to the preparation, less what was added, relative to it.
fn adds_up<I: Isotherm>(law: &I, ns: f64, stuck: Stuck, added: f64, block: Block) -> f64 {
    let b = tube(law, ns, stuck, added, block);
    assert!(b.value >= 0.0 && b.free >= 0.0, "{b:?}");
    let on_filter = match stuck {
        DURING => 0.0,
        AFTER => ns * b.free,
    };
    (b.free + b.value - on_filter - added).abs() / (added + on_filter)
}

/// Isotopic dilution against the balance of the label alone, at the free concentration of all of the ligand that two
/// nested brackets would find: label is bound as `S(X) / X` of it is, whatever the law.
fn diluted<I: Isotherm>(law: &I, ns: f64, stuck: Stuck, added: f64, c: f64) -> f64 {
    let a = match stuck {
        DURING => 1.0 + ns,
        AFTER => 1.0,
    };
    let all = root(0.0, (added + c) / a, |x| {
        a * x + law.specific(x) - (added + c)
    });
    let free = added / (a + law.specific(all) / all);
    let want = (law.specific(all) / all + ns) * free;
    let got = tube(law, ns, stuck, added, Block::SameLigand(c)).value;
    (got - want).abs() / want
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

proptest! {
    // The same cases every time: with a steep Hill law rounding alone reaches these bounds in one of some 60 000 cases.
    #![proptest_config(ProptestConfig {
        cases: 2000,
        failure_persistence: None,
        rng_seed: proptest::test_runner::RngSeed::Fixed(crate::simulate::rack::SEED),
        ..ProptestConfig::default()
    })]

    /// `T - N = S / (1 + ns)` where label sticks during incubation, `S (1 - ns)` after separation (algebra: the blocked tube
    /// has more free label to stick).
    #[test]
    fn total_less_blocked(
        laws in any_laws(), ns in magnitude(-9.0, 0.0), added in magnitude(-6.0, 3.0), stuck in any_stuck(),
    ) {
        prop_assert!(difference(&laws.one, ns, stuck, added) <= 4e-15);
        prop_assert!(difference(&laws.two, ns, stuck, added) <= 8e-15);
        prop_assert!(difference(&laws.hill, ns, stuck, added) <= 8e-15);
    }

    /// Nothing is lost.
    #[test]
    fn label_adds_up_for_every_law(
        laws in any_laws(), ns in magnitude(-9.0, 2.0), added in magnitude(-6.0, 3.0), stuck in any_stuck(),
        block in any_block(),
    ) {
        prop_assert!(adds_up(&laws.one, ns, stuck, added, block) <= 4e-15);
        prop_assert!(adds_up(&laws.two, ns, stuck, added, block) <= 8e-15);
        prop_assert!(adds_up(&laws.hill, ns, stuck, added, block) <= 8e-15);
    }

    /// The label has its share of what all of the ligand binds.
    #[test]
    fn isotopic_dilution_for_every_law(
        laws in any_laws(), ns in magnitude(-6.0, 0.5), added in magnitude(-3.0, 3.0), c in magnitude(-2.0, 5.0),
        stuck in any_stuck(),
    ) {
        prop_assert!(diluted(&laws.one, ns, stuck, added, c) <= 1e-11);
        prop_assert!(diluted(&laws.two, ns, stuck, added, c) <= 1e-11);
        prop_assert!(diluted(&laws.hill, ns, stuck, added, c) <= 1e-11);
    }

    /// Two classes of one constant are one class with the sites of both; a class without sites is none; and the
    /// order of the classes is none (algebra).
    #[test]
    fn two_classes_alike_are_one(
        kd in magnitude(-12.0, 3.0), sites in magnitude(-12.0, 3.0), part in 1i32..20,
        other in magnitude(-12.0, 3.0), ns in magnitude(-9.0, 2.0), added in magnitude(-12.0, 3.0),
        stuck in any_stuck(), block in any_block(),
    ) {
        // Sites of few enough digits that both parts and their sum are exact.
        let sites = f64::from(sites as f32);
        let r2 = sites * 0.5f64.powi(part);
        let r1 = sites - r2;
        let one = tube(&OneClass { kd, sites }, ns, stuck, added, block);
        let same = tube(&two([kd, r1, kd, r2]), ns, stuck, added, block);
        prop_assert!((same.value - one.value).abs() <= 4e-15 * one.value, "{same:?} {one:?}");
        prop_assert!((same.free - one.free).abs() <= 4e-15 * one.free, "{same:?} {one:?}");
        let alone = tube(&OneClass { kd, sites: r1 }, ns, stuck, added, block);
        let empty = tube(&two([kd, r1, other, 0.0]), ns, stuck, added, block);
        prop_assert!((empty.value - alone.value).abs() <= 4e-15 * alone.value);
        let both = two([kd, r1, other, r2]);
        let turned = two([other, r2, kd, r1]);
        let (b, t) = (tube(&both, ns, stuck, added, block), tube(&turned, ns, stuck, added, block));
        prop_assert!((b.value - t.value).abs() <= 4e-15 * b.value);
        prop_assert!(both.sorted() == turned.sorted() || kd == other);
    }

    /// Hill with `n = 1` is one class (algebra), with its derivatives.
    #[test]
    fn hill_of_one_is_one_class(
        kd in magnitude(-12.0, 3.0), sites in magnitude(-12.0, 3.0), ns in magnitude(-9.0, 2.0),
        added in magnitude(-12.0, 3.0), stuck in any_stuck(), block in any_block(),
    ) {
        let (mut by_one, mut by_hill) = ([0.0; 2], [0.0; 3]);
        let one = bound(&OneClass { kd, sites }, ns, stuck, added, block, &mut by_one);
        let same = bound(&hill(kd, sites, 1.0), ns, stuck, added, block, &mut by_hill);
        // A logarithm holds 1e-15 of a number at the ends of the range.
        for (got, want) in [
            (same.value, one.value),
            (same.free, one.free),
            (by_hill[0], by_one[0]),
            (by_hill[1], by_one[1]),
            (same.by_ln_ns, one.by_ln_ns),
            (same.by_ln_added, one.by_ln_added),
        ] {
            prop_assert!((got - want).abs() <= 4e-14 * want.abs().max(1e-4 * one.value), "{got} {want}");
        }
    }

    /// Two classes bind between one class with all sites at the tighter constant and at the looser one.
    #[test]
    fn two_classes_lie_between(
        laws in any_laws(), ns in magnitude(-9.0, 0.0), added in magnitude(-6.0, 3.0), stuck in any_stuck(),
    ) {
        let two = laws.two.sorted();
        let sites = two.first.sites + two.second.sites;
        let of = |kd| tube(&OneClass { kd, sites }, ns, stuck, added, Block::None).value;
        let got = tube(&two, ns, stuck, added, Block::None).value;
        prop_assert!(got <= of(two.first.kd) * (1.0 + 4e-15) && got >= of(two.second.kd) * (1.0 - 4e-15));
    }
}

/// The sum of two numbers of double length (Knuth's two-sum and Dekker's product, from memory): about 31 digits.
#[derive(Clone, Copy)]
struct Double(f64, f64);

impl Double {
    fn of(a: f64) -> Double {
        Double(a, 0.0)
    }

    fn sum(a: f64, b: f64) -> Double {
        let s = a + b;
        let v = s - a;
        Double(s, (a - (s - v)) + (b - v))
    }

    fn plus(self, other: Double) -> Double {
        let (high, low) = (Double::sum(self.0, other.0), Double::sum(self.1, other.1));
        let first = Double::sum(high.0, high.1 + low.0);
        Double::sum(first.0, first.1 + low.1)
    }

    fn times(self, other: Double) -> Double {
        let p = self.0 * other.0;
        let lost = self.0.mul_add(other.0, -p);
        Double::sum(p, lost + (self.0 * other.1 + self.1 * other.0))
    }

    fn power(self, n: u32) -> Double {
        (0..n).fold(Double::of(1.0), |p, _| p.times(self))
    }
}

/// The two neighbouring numbers between which an increasing function of a positive number changes its sign.
fn bracket(most: f64, short: impl Fn(f64) -> bool) -> (f64, f64) {
    // Positive numbers are ordered as their bits are.
    let (mut low, mut high) = (0u64, most.to_bits());
    assert!(short(0.0) && !short(most));
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

/// Free label of two classes, by bisection on
/// `(a F - LT) (K1 + F) (K2 + F) + R1 F (K2 + F) + R2 F (K1 + F)` in double length.
fn free_of_two([k1, r1, k2, r2]: [f64; 4], total: f64, a: f64) -> (f64, f64) {
    bracket(2.0 * total / a, |free| {
        let f = Double::of(free);
        let (first, second) = (Double::sum(k1, free), Double::sum(k2, free));
        let rest = Double::of(a).times(f).plus(Double::of(-total));
        let of = |r: f64, other: Double| Double::of(r).times(f).times(other);
        let sum = rest.times(first).times(second);
        sum.plus(of(r1, second)).plus(of(r2, first)).0 < 0.0
    })
}

/// The worst relative errors of two classes, of the balance solved as the program does and by plain bisection.
#[test]
fn free_label_of_two_classes_to_the_last_digits() {
    let mut rng = ChaCha8Rng::seed_from_u64(21);
    let mut size = |low: f64, high: f64| 10f64.powf(rng.random_range(low..high));
    let (mut worst, mut worst_plain) = ((0.0f64, String::new()), 0.0f64);
    for case in 0..20_000 {
        let (k1, r1, r2) = (size(-12.0, 3.0), size(-12.0, 3.0), size(-12.0, 3.0));
        // Any two constants, two that are nearly equal, and two that are equal.
        let k2 = match case % 5 {
            0 => k1 * (1.0 + size(-16.0, -1.0)),
            1 => k1,
            _ => size(-12.0, 3.0),
        };
        // Label near the sites of both, near those of one, and any.
        let total = match case % 7 {
            0 => (r1 + r2) * (1.0 + size(-16.0, -1.0)),
            1 => (r1 + r2) * (1.0 - size(-16.0, -1.0)),
            2 => r1 * (1.0 + size(-16.0, -1.0)),
            3 => r2 * (1.0 - size(-16.0, -1.0)),
            _ => size(-12.0, 3.0),
        };
        let a = if case % 3 == 0 {
            1.0
        } else {
            1.0 + size(-12.0, 3.0)
        };
        let p = [k1, r1, k2, r2];
        let truth = free_of_two(p, total, a);
        let law = two(p);
        let off = outside(law.free(total, a), truth);
        if off > worst.0 || off.is_nan() {
            worst = (off, format!("{p:?} {total} {a}"));
        }
        let plain = root(0.0, total / a, |f| a * f + law.specific(f) - total);
        worst_plain = worst_plain.max(outside(plain, truth));
    }
    println!(
        "two classes: free label off by at most {:e} ({}); by bisection of the plain balance {worst_plain:e}",
        worst.0, worst.1
    );
    assert!(worst.0 <= 2e-15, "{worst:?}");
    // The bound can be missed: the plain balance misses it by far.
    assert!(worst_plain > 1e-9, "{worst_plain:e}");
}

/// Free label of Hill's isotherm with `n = p / q`, by bisection on `(a F - LT) (Kh^n + F^n) + R F^n` in double length, all in the
/// whole powers of the `q`-th roots of `F` and `Kh`.
fn free_of_hill(root_kh: f64, sites: f64, (p, q): (u32, u32), total: f64, a: f64) -> (f64, f64) {
    let half = Double::of(root_kh).power(p);
    let most = 2.0 * (total / a).powf(1.0 / f64::from(q));
    let (low, high) = bracket(most, |root| {
        let root = Double::of(root);
        let (free, raised) = (root.power(q), root.power(p));
        let rest = Double::of(a).times(free).plus(Double::of(-total));
        let sum = rest.times(half.plus(raised));
        sum.plus(Double::of(sites).times(raised)).0 < 0.0
    });
    (Double::of(low).power(q).0, Double::of(high).power(q).0)
}

/// The worst relative errors of Hill's isotherm, of the balance solved as the program does and by plain bisection.
///
/// A power is `exp(n ln(F / Kh))`, and a double holds `ln F` to half a unit of its own last digit: where free label is 1e-140 nM
/// that is 3e-14 of it. So errors are counted in units of the last digit of the logarithms as well.
#[test]
fn free_label_of_hill_to_the_last_digits() {
    let mut rng = ChaCha8Rng::seed_from_u64(22);
    let (mut worst, mut worst_plain, mut most) = ((0.0f64, String::new()), 0.0f64, 0.0f64);
    for case in 0..10_000 {
        let n = match case % 4 {
            0 => (rng.random_range(1..=10), 10),
            1 => (rng.random_range(1..=10), 1),
            2 => (1, rng.random_range(1..=10)),
            _ => (rng.random_range(3..=20), 10),
        };
        let mut size = |low: f64, high: f64| 10f64.powf(rng.random_range(low..high));
        let root_kh = size(-12.0, 3.0).powf(1.0 / f64::from(n.1));
        let kh = Double::of(root_kh).power(n.1).0;
        let sites = size(-12.0, 3.0);
        let total = match case % 5 {
            0 => sites * (1.0 + size(-16.0, -1.0)),
            1 => sites * (1.0 - size(-16.0, -1.0)),
            _ => size(-12.0, 3.0),
        };
        let a = if case % 3 == 0 {
            1.0
        } else {
            1.0 + size(-12.0, 3.0)
        };
        let truth = free_of_hill(root_kh, sites, n, total, a);
        let law = hill(kh, sites, f64::from(n.0) / f64::from(n.1));
        let off = outside(law.free(total, a), truth);
        most = most.max(off);
        let off = off / (1.0 + truth.1.ln().abs() + kh.ln().abs());
        if off > worst.0 || off.is_nan() {
            worst = (off, format!("{law:?} {total} {a}"));
        }
        let plain = root(0.0, total / a, |f| a * f + law.specific(f) - total);
        worst_plain = worst_plain.max(outside(plain, truth));
    }
    println!(
        "Hill: free label off by at most {most:e}, over 1 + |ln F| + |ln Kh| at most {:e} ({}); by bisection of the plain \
         balance {worst_plain:e}",
        worst.0, worst.1
    );
    assert!(worst.0 <= 4e-16, "{worst:?}");
    assert!(worst_plain > 1e-9, "{worst_plain:e}");
}

/// Nothing to bind, and nothing that binds.
#[test]
fn the_ends_of_every_law() {
    for a in [1.0, 1.5] {
        assert_eq!(two([0.5, 0.02, 5.0, 0.1]).free(0.0, a), 0.0);
        assert_eq!(hill(0.5, 0.02, 1.6).free(0.0, a), 0.0);
        close(two([0.5, 0.0, 5.0, 0.0]).free(3.0, a), 3.0 / a, 1e-15);
        close(hill(0.5, 0.0, 1.6).free(3.0, a), 3.0 / a, 1e-15);
    }
}
