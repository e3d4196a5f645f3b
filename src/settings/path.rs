//! Names of files in the settings.

use std::path::{Path, PathBuf};

/// A name of the settings as a path: relative to the settings' own folder, `${NAME}` replaced by the environment
/// variable.
///
/// # Errors
/// Says which variable is not set.
pub(super) fn expand_path(base: &Path, name: &str) -> Result<PathBuf, String> {
    let mut out = String::new();
    let mut rest = name;
    while let Some((before, after)) = rest.split_once("${") {
        let (variable, after) = after
            .split_once('}')
            .ok_or_else(|| format!("`{name}` has `${{` without `}}`"))?;
        let value = std::env::var(variable)
            .map_err(|_| format!("`{name}`: the environment variable `{variable}` is not set"))?;
        out.push_str(before);
        out.push_str(&value);
        rest = after;
    }
    out.push_str(rest);
    Ok(base.join(out))
}
