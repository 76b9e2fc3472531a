//! Causes by the levels of the harmonics against each other, as common practice has them.

use super::orders::{db, ramp, shown};
use super::{Seen, Told};

/// A line this far over the noise may have others just under what is listed.
const HIDDEN_DB: f64 = 10.5;

pub(super) fn nearly_pure(seen: &Seen) -> Told {
    let orders = &seen.orders;
    let first = orders.at(1)?;
    let others = orders.power(|k| k > 1);
    let (below, evidence) = if others == 0.0 {
        // What noise may hide is not known to be absent.
        let below = orders.over_floor(1) - HIDDEN_DB;
        let evidence = format!(
            "order 1 at {first:.1} dBFS and no other order over the noise, which lets one see those less than \
             {below:.0} dB below it"
        );
        (below, evidence)
    } else {
        let below = first - db(others);
        (below, format!("order 1 at {first:.1} dBFS, all other orders together {below:.1} dB below it"))
    };
    (below >= 20.0).then(|| (ramp(below, (20.0, 0.5), (40.0, 0.9)), evidence))
}

pub(super) fn falling_odd(seen: &Seen) -> Told {
    let orders = &seen.orders;
    let (first, third) = (orders.at(1)?, orders.at(3)?);
    let fifth = orders.at_or_low(5);
    let odd_over_even = db(orders.power(|k| k % 2 == 1 && k > 1)) - db(orders.power(|k| k % 2 == 0));
    let falls = first > third && third >= fifth;
    let counts = first - third < 40.0 && odd_over_even >= 6.0;
    (falls && counts).then(|| {
        let tail = orders.at(5).map_or(String::new(), |level| format!(", order 5 {:.1} dB", first - level));
        let even = if odd_over_even < 200.0 {
            format!("odd orders from 3 up stand {odd_over_even:.1} dB over the even ones")
        } else {
            "no even order is over the noise".to_owned()
        };
        let evidence = format!("order 3 is {:.1} dB{tail} below order 1, and {even}", first - third);
        let sure = ramp(odd_over_even, (6.0, 0.55), (20.0, 0.9));
        (sure * if orders.at(5).is_some() { 1.0 } else { 0.7 }, evidence)
    })
}

/// How far the even orders stand over the odd ones, with the words for it.
fn even_over_odd(seen: &Seen) -> (f64, String) {
    let over = db(seen.orders.power(|k| k % 2 == 0)) - db(seen.orders.power(|k| k % 2 == 1));
    let words = if over < 200.0 {
        format!("even orders together stand {over:.1} dB over the odd ones")
    } else {
        "no odd order is over the noise".to_owned()
    };
    (over, words)
}

pub(super) fn even_orders(seen: &Seen) -> Told {
    let second = seen.orders.at(2)?;
    let (over, words) = even_over_odd(seen);
    (over >= 6.0).then(|| {
        let tail = [4, 6].iter().filter(|&&k| seen.orders.at(k).is_some_and(|level| level < second)).count();
        // A sawtooth has orders 4 and 6 too.
        let sure = ramp(over, (6.0, 0.6), (30.0, 0.9)) * [0.6, 0.85, 1.0][tail];
        (sure, format!("order 2 at {second:.1} dBFS, order 4 {}; {words}", shown(seen.orders.at_or_low(4))))
    })
}

pub(super) fn twice_the_mains(seen: &Seen) -> Told {
    let second = seen.orders.at(2)?;
    let (over, words) = even_over_odd(seen);
    (over >= 6.0).then(|| {
        let fourth = seen.orders.at_or_low(4);
        let sure = ramp(second - fourth, (6.0, 0.3), (20.0, 0.6));
        (sure, format!("order 2 at {second:.1} dBFS, order 4 {}; {words}", shown(fourth)))
    })
}

pub(super) fn long_comb(seen: &Seen) -> Told {
    let orders = &seen.orders;
    let strongest = orders.strongest().1;
    let high = orders.each().filter(|&k| k >= 10).count();
    if high < 6 {
        return None;
    }
    let below = strongest - db(orders.power(|k| k >= 10));
    (below <= 25.0).then(|| {
        let top = orders.each().max().unwrap_or(0);
        let evidence = format!(
            "{high} orders from 10 up to {top} are over the noise, together only {below:.1} dB below the strongest line"
        );
        (ramp(below, (0.0, 0.9), (25.0, 0.5)), evidence)
    })
}

pub(super) fn triplen(seen: &Seen) -> Told {
    let orders = &seen.orders;
    let (third, ninth) = (orders.at(3)?, orders.at(9)?);
    let (beside_third, beside_ninth) = (orders.at_or_low(5), orders.highest(&[7, 11]));
    let stands =
        third - beside_third >= 6.0 && ninth - beside_ninth >= 3.0 && third > orders.at_or_low(1) - 6.0;
    stands.then(|| {
        let evidence = format!(
            "order 3 at {third:.1} dBFS and order 9 at {ninth:.1} dBFS stand over orders 5 ({}), 7 and 11 ({})",
            shown(beside_third),
            shown(beside_ninth)
        );
        (0.9, evidence)
    })
}

/// The line current of a six-pulse bridge has orders 6n ± 1, its direct voltage 6n.
pub(super) fn six_pulse(seen: &Seen) -> Told {
    let orders = &seen.orders;
    if orders.count() >= 2 && orders.each().all(|k| k.is_multiple_of(6)) {
        let evidence =
            format!("order 6 {} and only its multiples are over the noise", shown(orders.at_or_low(6)));
        return Some((0.8, evidence));
    }
    let (fifth, seventh) = (orders.at(5)?, orders.at(7)?);
    let beside = orders.highest(&[2, 3, 4, 6, 8, 9]);
    let over = fifth.min(seventh) - beside;
    let tail = orders.at(11).is_some() || orders.at(13).is_some();
    (over >= 6.0).then(|| {
        let evidence = format!(
            "orders 5 ({fifth:.1} dBFS) and 7 ({seventh:.1} dBFS) stand over the even orders and those of three (the \
             highest {}), order 11 {}, order 13 {}",
            shown(beside),
            shown(orders.at_or_low(11)),
            shown(orders.at_or_low(13))
        );
        (ramp(over, (6.0, 0.6), (15.0, 0.9)) * if tail { 1.0 } else { 0.8 }, evidence)
    })
}

/// Current in short pulses about the crests: odd orders that fall slowly at first.
pub(super) fn peaky_odd(seen: &Seen) -> Told {
    let orders = &seen.orders;
    let levels = [orders.at(3)?, orders.at(5)?, orders.at(7)?];
    let (highest, lowest) =
        (levels.iter().copied().fold(f64::MIN, f64::max), levels.iter().copied().fold(f64::MAX, f64::min));
    let over_even = highest - orders.highest(&[2, 4, 6, 8]);
    let fits = highest - lowest <= 12.0 && orders.at_or_low(1) - highest <= 15.0 && over_even >= 10.0;
    (fits && lowest - orders.at_or_low(1) <= 6.0).then(|| {
        let evidence = format!(
            "orders 3, 5 and 7 at {:.1}, {:.1} and {:.1} dBFS lie within {:.1} dB of each other, the strongest {:.1} dB \
             from order 1 ({})",
            levels[0],
            levels[1],
            levels[2],
            highest - lowest,
            (orders.at_or_low(1) - highest).abs().min(400.0),
            shown(orders.at_or_low(1))
        );
        (ramp(highest - lowest, (3.0, 0.85), (12.0, 0.5)), evidence)
    })
}

/// A half-wave has order 1 and the even orders.
pub(super) fn half_wave(seen: &Seen) -> Told {
    let orders = &seen.orders;
    let (first, second, fourth) = (orders.at(1)?, orders.at(2)?, orders.at(4)?);
    let odd = db(orders.power(|k| k % 2 == 1 && k > 1));
    let over = db(orders.power(|k| k % 2 == 0)) - odd;
    ((first - second).abs() <= 15.0 && second > fourth && over >= 6.0).then(|| {
        let evidence = format!(
            "order 1 at {first:.1} dBFS with orders 2 and 4 at {second:.1} and {fourth:.1} dBFS, odd orders from 3 up {}",
            if over < 200.0 { format!("{over:.1} dB below the even ones") } else { "under the noise".to_owned() }
        );
        (ramp(over, (6.0, 0.5), (20.0, 0.8)), evidence)
    })
}
