//! Which frequencies of a count: those that filters, irises, data sets and phase matching leave.

use super::amplitude::Behind;
use super::slab::Ray;
use super::stack::{PUMP, Stack, Tuned, wavelength};
use super::{Mixture, PairsError};
use crate::material::Reach;
use crate::quantity::{SPEED_OF_LIGHT, Wavelength};

/// An interval of angular frequency, rad/s.
pub type Band = [f64; 2];

/// Without filters the band ends at this null of the phase-matching function.
pub const NULLS: f64 = 20.0;

fn frequencies([short, long]: [f64; 2]) -> Band {
    let omega = |w: f64| 2.0 * std::f64::consts::PI * SPEED_OF_LIGHT / w;
    [omega(long), omega(short.max(1e-12))]
}

fn common(a: Band, b: Band) -> Option<Band> {
    let both = [a[0].max(b[0]), a[1].min(b[1])];
    (both[1] > both[0]).then_some(both)
}

/// Frequencies of a for those of a photon in this arm.
fn of_a(own: Band, arm: usize, pump: f64) -> Band {
    if arm == 0 { own } else { [pump - own[1], pump - own[0]] }
}

impl Mixture<'_> {
    /// Frequencies of a for a frequency of the pump; `None` where nothing passes.
    pub(super) fn band(&self, pump: f64, tuned: &mut Tuned, nulls: &mut Option<Band>) -> Option<Band> {
        let nominal = self.stack.nominal();
        let centre = nominal[0] * pump / nominal[PUMP];
        // the whole of what is positive, then what data sets hold, then filters
        let mut band = self.covered([1e-3 * pump, 0.999 * pump], pump)?;
        for arm in 0..2 {
            for filter in &self.filters[arm] {
                let window = frequencies(filter.window(self.photon(arm)));
                band = common(band, of_a(window, arm, pump))?;
            }
        }
        if self.filters.iter().all(Vec::is_empty) {
            if nulls.is_none() {
                let found = self.matched_band(band, centre, pump, tuned, NULLS)?;
                *nulls = Some(found.map(|omega| omega - centre));
            }
            if let Some(offset) = nulls {
                band = common(band, offset.map(|omega| centre + omega))?;
            }
        }
        self.open_band(band, centre, pump)
    }

    pub(super) fn photon(&self, arm: usize) -> Wavelength {
        if arm == 0 { self.stack.photons.signal } else { self.stack.photons.idler }
    }

    /// Wavelengths that the data sets in the way of an arm cover, m.
    fn ranges(&self, arm: usize) -> impl Iterator<Item = [f64; 2]> {
        let Stack { crystals, arm_plates, .. } = self.stack;
        let all = crystals.iter().map(|(slab, _)| slab).chain(&arm_plates[arm]);
        let bound = all.map(|slab| &slab.crystal).filter(|crystal| crystal.reach == Reach::Within);
        bound.map(|crystal| [crystal.set().from.si(), crystal.set().to.si()])
    }

    /// Wavelengths of a, shortest first, worth looking at: those of which the filters leave a hundredth of what they leave
    /// at best; without filters the main lobe of phase matching.
    ///
    /// # Errors
    /// Nothing passes.
    pub fn window(&self) -> Result<[Wavelength; 2], PairsError> {
        const STEPS: usize = 2000;
        let [centre, _, pump] = self.stack.nominal();
        let (mut tuned, mut lobe) = (Tuned::default(), None);
        if self.filters.iter().all(Vec::is_empty) {
            let all = [1e-3 * pump, 0.999 * pump];
            let bounds = self.covered(all, pump).ok_or(PairsError::NothingCollected)?;
            let found = self.matched_band(bounds, centre, pump, &mut tuned, 1.0);
            lobe = found.map(|band| band.map(|omega| omega - centre));
        }
        let band = self.band(pump, &mut tuned, &mut lobe).ok_or(PairsError::NothingCollected)?;
        let at = |j: usize| band[0] + (band[1] - band[0]) * j as f64 / STEPS as f64;
        let passed: Vec<f64> = (0..=STEPS).map(|j| self.passes(wavelength(at(j)))).collect();
        let least = 0.01 * passed.iter().copied().fold(0.0, f64::max);
        let open = |passed: &f64| *passed > 0.0 && *passed >= least;
        let ends = passed.iter().rposition(open).zip(passed.iter().position(open));
        let (last, first) = ends.ok_or(PairsError::NothingCollected)?;
        Ok([last, first].map(|j| wavelength(at(j))))
    }

    /// The part of a band that the data sets in the way of both photons cover.
    fn covered(&self, band: Band, pump: f64) -> Option<Band> {
        let windows = (0..2).flat_map(|arm| self.ranges(arm).map(move |window| (arm, window)));
        windows.map(|(arm, window)| of_a(frequencies(window), arm, pump)).try_fold(band, common)
    }

    /// Up to so many nulls of the best matched history on either side.
    fn matched_band(
        &self,
        band: Band,
        centre: f64,
        pump: f64,
        tuned: &mut Tuned,
        nulls: f64,
    ) -> Option<Band> {
        const STEPS: usize = 400;
        let mut found = [centre, centre];
        let mut born = Vec::new();
        for side in 0..2 {
            let step = (band[side] - centre) / STEPS as f64;
            for j in 0..STEPS {
                let omega = centre + step * j as f64;
                let matched = self.least_detuning(omega, pump, tuned, &mut born);
                if j > 0 && matched.is_none_or(|x| x > nulls * std::f64::consts::PI) {
                    break;
                }
                found[side] = omega + step * 0.999;
            }
        }
        (found[1] > found[0]).then_some(found)
    }

    fn least_detuning(
        &self,
        omega: f64,
        pump: f64,
        tuned: &mut Tuned,
        born: &mut Vec<super::amplitude::Born>,
    ) -> Option<f64> {
        self.stack.tune(tuned, omega, pump).ok()?;
        let a = Ray::new(tuned.k0[0], self.stack.arms[0]);
        let b = Ray::new(tuned.k0[1], self.stack.follow(&nalgebra::Vector3::z(), &a.d, &tuned.k0)?);
        self.stack.born(tuned, &a, &b, Behind::Crystals, born)?;
        Some(born.iter().map(|pair| pair.detuning.abs()).fold(f64::INFINITY, f64::min))
    }

    /// The part of a band for which a pair can pass both irises.
    fn open_band(&self, band: Band, centre: f64, pump: f64) -> Option<Band> {
        if self.radii.iter().any(|r| !r.is_finite()) {
            return Some(band);
        }
        let open = |omega: f64| self.is_open(omega, pump);
        let start =
            if open(centre) { centre.clamp(band[0], band[1]) } else { self.nearest_opening(band, pump)? };
        Some([0, 1].map(|side| {
            let (mut inside, mut outside) = (start, band[side]);
            if open(outside) {
                return outside;
            }
            for _ in 0..48 {
                let middle = 0.5 * (inside + outside);
                if open(middle) { inside = middle } else { outside = middle }
            }
            inside
        }))
    }

    /// Where the discs overlap most, for directions that are not those of a pair at the nominal wavelengths.
    fn nearest_opening(&self, band: Band, pump: f64) -> Option<f64> {
        const STEPS: usize = 200;
        let step = (band[1] - band[0]) / STEPS as f64;
        let miss = |omega: f64| self.miss(omega, pump).unwrap_or(f64::INFINITY);
        let coarse = (0..=STEPS).map(|j| band[0] + step * j as f64);
        let mut best = coarse.min_by(|a, b| miss(*a).total_cmp(&miss(*b)))?;
        let mut width = step;
        while width > 1e-9 * best {
            let sides = [best - width, best + width];
            match sides.into_iter().find(|side| miss(*side) < miss(best)) {
                Some(side) => best = side,
                None => width *= 0.5,
            }
        }
        (miss(best) < 0.0).then_some(best.clamp(band[0], band[1]))
    }

    /// Vacuum wavenumbers of a, b and the pump.
    pub(super) fn wavenumbers(omega: f64, pump: f64) -> [f64; 3] {
        [omega, pump - omega, pump].map(|w| wavelength(w).wavenumber())
    }
}
