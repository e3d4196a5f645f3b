//! Names of files in the settings.

use std::path::{Path, PathBuf};

/// A name of the settings as a path: relative to the settings' own folder, `${NAME}` replaced by the environment
/// variable.
///
/// # Errors
/// Says which variable is not set.
pub(super) fn expand_path(base: &Path, name: &str) -> Result<PathBuf, String> {
    Ok(base.join(expand(name, str::to_string)?))
}

/// The same as a pattern of file names, in which only what the settings themselves say can be a sign of the pattern.
///
/// # Errors
/// Says which variable is not set.
pub(super) fn expand_pattern(base: &Path, name: &str) -> Result<String, String> {
    let pattern = expand(name, glob::Pattern::escape)?;
    let base = PathBuf::from(glob::Pattern::escape(&base.to_string_lossy()));
    Ok(base.join(pattern).to_string_lossy().into_owned())
}

fn expand(name: &str, value_as: impl Fn(&str) -> String) -> Result<String, String> {
    let mut out = String::new();
    let mut rest = name;
    while let Some((before, after)) = rest.split_once("${") {
        let (variable, after) = after
            .split_once('}')
            .ok_or_else(|| format!("`{name}` has `${{` without `}}`"))?;
        let value = std::env::var(variable)
            .map_err(|_| format!("`{name}`: the environment variable `{variable}` is not set"))?;
        out.push_str(before);
        out.push_str(&value_as(&value));
        rest = after;
    }
    out.push_str(rest);
    Ok(out)
}
