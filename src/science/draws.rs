//! The counter-based generator: draws that depend on a seed, a random variable and a member, and on nothing else.
//!
//! The key of the stream of one variable is K = SHA-256("rhythmite draw v1" ‖ seed, 8 bytes little-endian ‖ variable,
//! 32 bytes). Member m owns the 64 bits at 32-bit word position 2m of the ChaCha8 key stream of K (nonce zero, counter
//! from zero), the first word being the low half. Its uniform is u = (⌊bits / 2¹²⌋ + ½) · 2⁻⁵²: 52 bits, so that every
//! value is a double exactly, u and 1 − u are equally likely, and neither 0 nor 1 occurs. (With 53 bits the
//! largest integer plus one half rounds to 2⁵³, that is to u = 1, whose normal quantile is infinite.)
//!
//! Only integer arithmetic, correctly rounded operations and `libm` (software that is the same on every machine)
//! take part, so the same draws are the same bits everywhere.
//!
//! Sources: Bernstein (2008), ChaCha, a variant of Salsa20; Salmon et al. (2011), Parallel random numbers: as easy as
//! 1, 2, 3 (the idea of a generator keyed by a counter); Wichura (1988), Applied Statistics 37, 477, algorithm AS 241.

use rand_chacha::ChaCha8Rng;
use rand_chacha::rand_core::{Rng, SeedableRng};
use sha2::{Digest, Sha256};

/// Separates these keys from any other use of SHA-256 over a seed and an identity.
const DOMAIN: &[u8] = b"rhythmite draw v1";

/// The uniform draw in the open interval (0, 1) of one `member` of one random `variable` (its 32-byte identity) under
/// one `seed`. Prefer [`uniforms`] for many members: it makes the key once.
#[must_use]
pub fn uniform(seed: u64, variable: &[u8; 32], member: u64) -> f64 {
    uniform_from_bits(stream_at(seed, variable, member).next_u64())
}

/// The uniform draws of the members `first_member`, `first_member + 1`, …, written into `out`: the same bits as
/// [`uniform`] of each, however the members are split between calls.
pub fn uniforms(seed: u64, variable: &[u8; 32], first_member: u64, out: &mut [f64]) {
    let mut stream = stream_at(seed, variable, first_member);
    for value in out {
        *value = uniform_from_bits(stream.next_u64());
    }
}

/// The standard normal draw of one `member`: [`normal_quantile`] of [`uniform`].
#[must_use]
pub fn normal(seed: u64, variable: &[u8; 32], member: u64) -> f64 {
    normal_quantile(uniform(seed, variable, member))
}

/// The standard normal draws of the members from `first_member` on: the same bits as [`normal`] of each.
pub fn normals(seed: u64, variable: &[u8; 32], first_member: u64, out: &mut [f64]) {
    uniforms(seed, variable, first_member, out);
    for value in out {
        *value = normal_quantile(*value);
    }
}

/// The key stream of `variable` under `seed`, placed at `member`.
fn stream_at(seed: u64, variable: &[u8; 32], member: u64) -> ChaCha8Rng {
    let mut hash = Sha256::new();
    hash.update(DOMAIN);
    hash.update(seed.to_le_bytes());
    hash.update(variable);
    let mut stream = ChaCha8Rng::from_seed(hash.finalize().into());
    stream.set_word_pos(2 * u128::from(member));
    stream
}

/// u = (⌊bits / 2¹²⌋ + ½) · 2⁻⁵², exactly.
fn uniform_from_bits(bits: u64) -> f64 {
    const UNIT: f64 = 1.0 / (1_u64 << 52) as f64;
    ((bits >> 12) as f64 + 0.5) * UNIT
}

/// The standard normal quantile: the x for which Φ(x) = `probability`, to about 1e-16 relative.
///
/// Rational approximations in three regions (PPND16). 0 gives −∞, 1 gives +∞, anything outside [0, 1] and NaN give NaN.
///
/// Source: Wichura (1988), Applied Statistics 37, 477–484, algorithm AS 241.
#[must_use]
pub fn normal_quantile(probability: f64) -> f64 {
    let q = probability - 0.5;
    if q.abs() <= 0.425 {
        return q * ratio(&CENTRE, 0.180_625 - q * q);
    }
    let tail = if q < 0.0 { probability } else { 1.0 - probability };
    if tail.is_nan() || tail < 0.0 {
        return f64::NAN;
    }
    let r = libm::sqrt(-libm::log(tail));
    let size = if r.is_infinite() {
        r
    } else if r <= 5.0 {
        ratio(&SHOULDER, r - 1.6)
    } else {
        ratio(&TAIL, r - 5.0)
    };
    if q < 0.0 { -size } else { size }
}

/// Numerator and denominator of one region, constant terms first.
struct Rational {
    numerator: [f64; 8],
    denominator: [f64; 8],
}

fn ratio(coefficients: &Rational, argument: f64) -> f64 {
    let horner = |terms: &[f64; 8]| terms.iter().rev().fold(0.0, |sum, &term| sum * argument + term);
    horner(&coefficients.numerator) / horner(&coefficients.denominator)
}

/// |p − ½| ≤ 0.425 (coefficients a and b of AS 241).
#[allow(clippy::excessive_precision, reason = "the digits of the publication")]
const CENTRE: Rational = Rational {
    numerator: [
        3.387_132_872_796_366_608,
        1.331_416_678_917_843_774_5e2,
        1.971_590_950_306_551_442_7e3,
        1.373_169_376_550_946_112_5e4,
        4.592_195_393_154_987_145_7e4,
        6.726_577_092_700_870_085_3e4,
        3.343_057_558_358_812_810_5e4,
        2.509_080_928_730_122_672_7e3,
    ],
    denominator: [
        1.0,
        4.231_333_070_160_091_125_2e1,
        6.871_870_074_920_579_083e2,
        5.394_196_021_424_751_107_7e3,
        2.121_379_430_158_659_586_7e4,
        3.930_789_580_009_271_061e4,
        2.872_908_573_572_194_267_4e4,
        5.226_495_278_852_854_561e3,
    ],
};

/// Tail probabilities down to e⁻²⁵ (coefficients c and d).
#[allow(clippy::excessive_precision, reason = "the digits of the publication")]
const SHOULDER: Rational = Rational {
    numerator: [
        1.423_437_110_749_683_577_34,
        4.630_337_846_156_545_295_9,
        5.769_497_221_460_691_405_5,
        3.647_848_324_763_204_605_04,
        1.270_458_252_452_368_382_58,
        2.417_807_251_774_506_117_7e-1,
        2.272_384_498_926_918_458_33e-2,
        7.745_450_142_783_414_076_4e-4,
    ],
    denominator: [
        1.0,
        2.053_191_626_637_758_821_87,
        1.676_384_830_183_803_849_4,
        6.897_673_349_851_000_045_5e-1,
        1.481_039_764_274_800_745_9e-1,
        1.519_866_656_361_645_719_66e-2,
        5.475_938_084_995_344_946e-4,
        1.050_750_071_644_416_843_24e-9,
    ],
};

/// Tail probabilities below e⁻²⁵ (coefficients e and f).
#[allow(clippy::excessive_precision, reason = "the digits of the publication")]
const TAIL: Rational = Rational {
    numerator: [
        6.657_904_643_501_103_777_2,
        5.463_784_911_164_114_369_9,
        1.784_826_539_917_291_335_8,
        2.965_605_718_285_048_912_3e-1,
        2.653_218_952_657_612_309_3e-2,
        1.242_660_947_388_078_438_6e-3,
        2.711_555_568_743_487_578_15e-5,
        2.010_334_399_292_288_132_65e-7,
    ],
    denominator: [
        1.0,
        5.998_322_065_558_879_376_9e-1,
        1.369_298_809_227_358_053_1e-1,
        1.487_536_129_085_061_485_25e-2,
        7.868_691_311_456_132_591e-4,
        1.846_318_317_510_054_681_8e-5,
        1.421_511_758_316_445_888_7e-7,
        2.044_263_103_389_939_785_64e-15,
    ],
};

#[cfg(test)]
mod tests {
    use super::*;
    use statrs::distribution::{ContinuousCDF, Normal};

    const VARIABLE: [u8; 32] = [7; 32];

    /// Key stream of ChaCha with 8 rounds, 256-bit key zero and nonce zero, blocks 0 and 1: test case 1 of the
    /// draft-strombergson-chacha-test-vectors, typed from memory.
    const ZERO_KEY_STREAM: [u8; 80] = [
        0x3e, 0x00, 0xef, 0x2f, 0x89, 0x5f, 0x40, 0xd6, 0x7f, 0x5b, 0xb8, 0xe8, 0x1f, 0x09, 0xa5, 0xa1, 0x2c,
        0x84, 0x0e, 0xc3, 0xce, 0x9a, 0x7f, 0x3b, 0x18, 0x1b, 0xe1, 0x88, 0xef, 0x71, 0x1a, 0x1e, 0x98, 0x4c,
        0xe1, 0x72, 0xb9, 0x21, 0x6f, 0x41, 0x9f, 0x44, 0x53, 0x67, 0x45, 0x6d, 0x56, 0x19, 0x31, 0x4a, 0x42,
        0xa3, 0xda, 0x86, 0xb0, 0x01, 0x38, 0x7b, 0xfd, 0xb8, 0x0e, 0x0c, 0xfe, 0x42, 0xd2, 0xae, 0xfa, 0x0d,
        0xea, 0xa5, 0xc1, 0x51, 0xbf, 0x0a, 0xdb, 0x6c, 0x01, 0xf2, 0xa5, 0xad,
    ];

    #[test]
    fn the_key_stream_is_the_published_one() {
        let mut stream = ChaCha8Rng::from_seed([0; 32]);
        for (number, bytes) in ZERO_KEY_STREAM.chunks_exact(8).enumerate() {
            let expected = bytes.iter().rev().fold(0_u64, |word, &byte| (word << 8) | u64::from(byte));
            assert_eq!(stream.next_u64(), expected, "64-bit word {number}");
            let mut placed = ChaCha8Rng::from_seed([0; 32]);
            placed.set_word_pos(2 * number as u128);
            assert_eq!(placed.next_u64(), expected, "64-bit word {number}, sought");
        }
    }

    /// Computed by a second implementation of the whole rule (SHA-256 of a standard library, ChaCha8 written out from its
    /// definition), never from this one: these draws are what published results rest on.
    #[test]
    fn draws_are_the_ones_that_a_second_implementation_makes() {
        let variable: [u8; 32] = std::array::from_fn(|place| place as u8);
        for (seed, member, bits) in [
            (11, 0, 0x1fb7_5c48_8394_e5dd),
            (11, 9, 0x7196_f9f8_874f_f802),
            (u64::MAX, 1023, 0x2302_6816_915e_22f0),
            (0, 1_000_000_000_000, 0x863a_3aa5_0e24_76fe),
        ] {
            assert_eq!(stream_at(seed, &variable, member).next_u64(), bits);
            assert_eq!(uniform(seed, &variable, member).to_bits(), uniform_from_bits(bits).to_bits());
        }
        // Both are exact in double precision.
        assert_eq!(uniform(11, &variable, 0).to_bits(), 0.123_891_608_909_236_f64.to_bits());
        assert_eq!(uniform(0, &variable, 1_000_000_000_000).to_bits(), 0.524_326_005_264_940_7_f64.to_bits());
    }

    #[test]
    fn any_split_of_the_members_gives_the_same_bits() {
        let mut whole = vec![0.0; 3000];
        normals(11, &VARIABLE, 0, &mut whole);
        for block in [1, 7, 31, 32, 1024, 2999] {
            let mut split = vec![0.0; 3000];
            for (number, part) in split.chunks_mut(block).enumerate() {
                normals(11, &VARIABLE, (number * block) as u64, part);
            }
            assert!(whole.iter().zip(&split).all(|(a, b)| a.to_bits() == b.to_bits()), "blocks of {block}");
        }
        for member in [0, 1, 31, 32, 33, 1023, 2999] {
            assert_eq!(normal(11, &VARIABLE, member as u64).to_bits(), whole[member].to_bits());
        }
    }

    #[test]
    fn another_seed_or_variable_draws_afresh() {
        let mut other_variable = VARIABLE;
        other_variable[31] = 8;
        let bits = uniform(11, &VARIABLE, 5).to_bits();
        assert_ne!(bits, uniform(12, &VARIABLE, 5).to_bits());
        assert_ne!(bits, uniform(11, &other_variable, 5).to_bits());
        assert_ne!(bits, uniform(11, &VARIABLE, 6).to_bits());
    }

    #[test]
    fn the_last_members_that_a_number_can_name_are_drawn_too() {
        let value = uniform(11, &VARIABLE, u64::MAX);
        assert!(value > 0.0 && value < 1.0);
    }

    #[test]
    fn a_uniform_is_never_zero_or_one() {
        let (least, greatest) = (uniform_from_bits(0), uniform_from_bits(u64::MAX));
        assert!(least > 0.0 && greatest < 1.0);
        assert_eq!(least.to_bits(), (1.0 - greatest).to_bits());
        assert!(normal_quantile(greatest).is_finite());
    }

    #[test]
    fn many_uniforms_and_normals_have_the_moments_of_their_distributions() {
        const COUNT: usize = 200_000;
        let mut values = vec![0.0; COUNT];
        uniforms(1, &VARIABLE, 0, &mut values);
        let mean = values.iter().sum::<f64>() / COUNT as f64;
        // Five standard errors of the mean, sqrt(1 / 12 / n).
        assert!((mean - 0.5).abs() < 5.0 * (1.0 / 12.0 / COUNT as f64).sqrt());
        normals(1, &VARIABLE, 0, &mut values);
        let mean = values.iter().sum::<f64>() / COUNT as f64;
        let variance = values.iter().map(|value| value * value).sum::<f64>() / COUNT as f64;
        assert!(mean.abs() < 5.0 / (COUNT as f64).sqrt());
        assert!((variance - 1.0).abs() < 5.0 * (2.0 / COUNT as f64).sqrt());
    }

    #[test]
    fn the_normal_quantile_inverts_the_distribution_function() -> Result<(), statrs::distribution::NormalError>
    {
        let normal = Normal::new(0.0, 1.0)?;
        let distribution = |x: f64| libm::erfc(-x / std::f64::consts::SQRT_2) / 2.0;
        for number in 1..2000 {
            let probability = f64::from(number) / 2000.0;
            let quantile = normal_quantile(probability);
            let back = distribution(quantile);
            assert!((back / probability - 1.0).abs() < 1e-14, "{probability}: {back}");
            // statrs is good to about 1e-10 here.
            assert!((quantile - normal.inverse_cdf(probability)).abs() < 1e-9, "{probability}");
        }
        for exponent in 4..300 {
            let probability = 10_f64.powi(-exponent);
            let back = distribution(normal_quantile(probability));
            // The condition of Φ in its tail is about x², up to 1400 at 1e-300.
            assert!((back / probability - 1.0).abs() < 1e-12, "1e-{exponent}: {back}");
        }
        Ok(())
    }

    #[test]
    fn the_ends_of_the_normal_quantile_are_infinite_and_outside_is_nothing() {
        assert!(normal_quantile(0.0).is_infinite() && normal_quantile(0.0) < 0.0);
        assert!(normal_quantile(1.0).is_infinite() && normal_quantile(1.0) > 0.0);
        assert!(
            normal_quantile(-0.1).is_nan()
                && normal_quantile(1.1).is_nan()
                && normal_quantile(f64::NAN).is_nan()
        );
        assert_eq!(normal_quantile(0.5).to_bits(), 0.0_f64.to_bits());
    }
}
