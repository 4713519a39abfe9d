//! Random numbers: one stream for each purpose, so that no result depends on the order of work.

use rand_chacha::ChaCha8Rng;
use rand_chacha::rand_core::SeedableRng;
use rand_distr::{Distribution, StandardNormal, StandardUniform};

/// What a stream of random numbers is for.
#[derive(Clone, Copy, Debug, PartialEq, Eq)]
pub(super) enum Stream {
    /// Errors of the observer's knowledge.
    Knowledge,
    /// The detector's fixed pattern.
    Detector,
    /// Slow processes.
    Slow,
    /// A screen, by its number.
    Screen(u32),
    /// A frame, by its number.
    Frame(u32),
    /// A dark, by its number.
    Dark(u32),
    /// A flat, by its number.
    Flat(u32),
}

/// Normal and uniform numbers of one stream.
#[derive(Clone, Debug)]
pub(super) struct Draw(ChaCha8Rng);

impl Draw {
    pub(super) fn new(seed: u64, stream: Stream) -> Self {
        let (kind, number) = match stream {
            Stream::Knowledge => (0, 0),
            Stream::Detector => (1, 0),
            Stream::Slow => (2, 0),
            Stream::Screen(it) => (3, it),
            Stream::Frame(it) => (4, it),
            Stream::Dark(it) => (5, it),
            Stream::Flat(it) => (6, it),
        };
        let mut generator = ChaCha8Rng::seed_from_u64(seed);
        generator.set_stream((kind << 32) | u64::from(number));
        Self(generator)
    }

    /// Mean 0, standard deviation 1.
    #[inline]
    pub(super) fn normal(&mut self) -> f64 {
        StandardNormal.sample(&mut self.0)
    }

    /// The same in single precision.
    #[inline]
    pub(super) fn normal_f32(&mut self) -> f32 {
        StandardNormal.sample(&mut self.0)
    }

    /// 0 to 1, one excluded.
    #[inline]
    pub(super) fn uniform(&mut self) -> f64 {
        StandardUniform.sample(&mut self.0)
    }

    /// A number of photons of small mean, by inversion of the Poisson distribution.
    #[inline]
    pub(super) fn few_photons(&mut self, mean: f64) -> f64 {
        let mut left = self.uniform();
        let mut term = (-mean).exp();
        let mut count = 0.0;
        while left >= term && term > 0.0 {
            left -= term;
            count += 1.0;
            term *= mean / count;
        }
        count
    }
}
