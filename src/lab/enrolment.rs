//! Kernel and extension made known to Jupyter, and taken away again.

use std::path::Path;

use super::install::Parcel;
use super::places::jupyter_data;
use super::{Place, Refusal, build_folder_note, extension, kernelspec};

/// Write the kernelspec that starts `program`, and the lab extension. A line for each that was not there already in the
/// same form; nothing is written over that is not ours.
///
/// # Errors
/// A file of somebody else's in the way, no permission, a path that Jupyter cannot use.
pub fn enrol(place: &Place, program: &Path) -> Result<Vec<String>, Refusal> {
    let data = jupyter_data(place)?;
    let parcels = [kernelspec::parcel(program)?, extension::parcel()];
    for parcel in &parcels {
        parcel.check(&data)?;
    }
    let mut lines = Vec::new();
    for parcel in &parcels {
        if parcel.write(&data)? {
            lines.push(described(parcel, &data));
        }
    }
    if !lines.is_empty() {
        lines.extend(build_folder_note(program));
    }
    Ok(lines)
}

fn described(parcel: &Parcel, data: &Path) -> String {
    let names: Vec<&str> = parcel.files.iter().map(|(name, _)| name.as_str()).collect();
    format!("wrote the {} {} ({})", parcel.what, data.join(&parcel.folder).display(), names.join(", "))
}

/// Take away what [`enrol`] wrote, and say so in a line each.
///
/// # Errors
/// No permission, or a receipt that was changed.
pub fn withdraw(place: &Place) -> Result<Vec<String>, Refusal> {
    let data = jupyter_data(place)?;
    // Which program a kernelspec starts does not matter here.
    let parcels = [kernelspec::parcel(Path::new("rhythmite"))?, extension::parcel()];
    let mut lines = Vec::new();
    for parcel in &parcels {
        lines.extend(parcel.remove(&data)?);
    }
    if lines.is_empty() {
        lines.push(format!("nothing was enrolled in {}", data.display()));
    }
    Ok(lines)
}
