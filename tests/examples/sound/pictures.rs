//! Pictures of a performance.

use std::io;
use std::path::Path;

use ratewright_client::Realised;
use ratewright_pictures::{Moment, PhaseStory, SpectrumStory};
use ratewright_tests::sound::performance::{Part, Performance};
use ratewright_tests::sound::programme::TONES_HZ;
use ratewright_tests::sound::tone::Spectrum;
use ratewright_tests::sound::world::World;

/// How far from the tone the second picture of a spectrum reaches, Hz.
const NEAR_HZ: f64 = 30.0;

/// Draws the FIFO's level of each part, and the spectrum of each of its tones, whole and near the tone.
///
/// # Errors
/// What the file system says.
pub(crate) fn draw(
    performance: &Performance,
    headroom_samples: f64,
    folder: &Path,
) -> io::Result<()> {
    std::fs::create_dir_all(folder)?;
    for part in &performance.parts {
        let story = phase_story(&performance.world, part, headroom_samples);
        let file = folder.join(format!("{}-fifo.svg", part.name));
        std::fs::write(file, story.draw().file())?;
        for (tone, hz) in TONES_HZ.into_iter().enumerate() {
            let spectrum = part.spectrum(tone);
            let title = format!("{}, {} kHz", part.name, hz / 1_000.0);
            let file = folder.join(format!("{}-{hz}-hz.svg", part.name));
            let near = folder.join(format!("{}-{hz}-hz-near.svg", part.name));
            std::fs::write(file, whole(&title, &spectrum).draw().file())?;
            std::fs::write(near, close(&title, &spectrum).draw().file())?;
        }
    }
    Ok(())
}

fn whole(title: &str, spectrum: &Spectrum) -> SpectrumStory {
    SpectrumStory {
        title: title.to_owned(),
        first_hz: 0.0,
        bin_hz: spectrum.bin_hz,
        level_db: spectrum.level_db.clone(),
        floor_db: -180.0,
    }
}

fn close(title: &str, spectrum: &Spectrum) -> SpectrumStory {
    let reach = ((NEAR_HZ / spectrum.bin_hz) as usize).min(spectrum.tone);
    let last = (spectrum.tone + reach).min(spectrum.level_db.len() - 1);
    SpectrumStory {
        first_hz: -(reach as f64 * spectrum.bin_hz),
        level_db: spectrum.level_db[spectrum.tone - reach..=last].to_vec(),
        floor_db: -150.0,
        ..whole(title, spectrum)
    }
}

fn phase_story(world: &World, part: &Part, headroom_samples: f64) -> PhaseStory {
    let slots = &part.played.slots;
    let begun_ns = slots.first().map_or(0, |slot| slot.at_ns);
    let ended_ns = slots.last().map_or(begun_ns, |slot| slot.at_ns);
    let since_s = |ns: i64| (ns - begun_ns) as f64 * 1e-9;
    let truth = slots.iter().flat_map(|slot| {
        let at_s = since_s(slot.at_ns);
        [slot.phase.least, slot.phase.most].map(|value| Moment { at_s, value })
    });
    let account = part.account.iter().map(|&(house_ns, value)| Moment {
        at_s: since_s(house_ns - world.origin_ns),
        value,
    });
    let length_s = since_s(ended_ns);
    let mut running: Option<Realised> = None;
    let changes = part.settings.iter().filter_map(|(setting, _)| {
        let is_change = running.replace(setting.realised) != Some(setting.realised);
        is_change.then(|| since_s(setting.effect_ns - world.origin_ns))
    });
    PhaseStory {
        crossing: part.name.to_owned(),
        headroom_samples,
        truth: truth.collect(),
        account: account
            .filter(|moment: &Moment| moment.at_s >= 0.0 && moment.at_s <= length_s)
            .collect(),
        changes_s: changes.filter(|at_s| *at_s <= length_s).collect(),
        without_readings: Vec::new(),
        length_s,
    }
}
