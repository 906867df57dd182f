//! From a study to the settings of the crates below.

use armilla_follow::Settings;
use armilla_stability::CycleSettings;

use crate::file::StrideOverride;
use crate::study::Study;

/// Coarsest accuracy of the profiles: with coarser ones a branch near its birth is shifted by more than it has moved, and
/// they cost next to nothing less.
const COARSEST: f64 = 1e-6;

/// Settings of the cycles of a study; `turns` multiplies a fixed number of intervals.
pub(crate) fn cycle_settings(study: &Study, turns: usize) -> CycleSettings {
    let mut settings = CycleSettings::new(study.file.accuracy.min(COARSEST));
    if let Some(mesh) = study.file.mesh {
        if let Some(degree) = mesh.degree {
            settings = settings.with_degree(degree);
        }
        settings.mesh.fixed = mesh.intervals.map(|intervals| intervals.saturating_mul(turns));
    }
    settings
}

/// Settings of following.
pub(crate) fn follow_settings(study: &Study) -> Settings {
    let mut settings = Settings::new(study.range);
    settings.targets.clone_from(&study.file.targets);
    if let Some(stride) = study.file.stride {
        override_strides(&mut settings, stride);
    }
    settings
}

/// Applies an override; a stride that is given alone moves the others so that their order holds where it can.
pub(crate) fn override_strides(settings: &mut Settings, stride: StrideOverride) {
    settings.shortest = stride.shortest.unwrap_or(settings.shortest);
    settings.longest = stride.longest.unwrap_or(settings.longest);
    settings.initial = stride.initial.unwrap_or(settings.initial.min(settings.longest).max(settings.shortest));
}
