//! Where things are kept on this machine.

use directories::ProjectDirs;
use std::path::PathBuf;

/// The folders of this program; none of them need be there.
#[derive(Debug, Clone, PartialEq, Eq)]
pub struct Places {
    /// Copies of the demonstrations.
    pub data: PathBuf,
    /// What is remembered between runs.
    pub state: PathBuf,
    /// The user's settings, which only supply defaults for new titrations.
    pub config: PathBuf,
}

/// The folders as the system has them: `XDG_DATA_HOME`, `XDG_STATE_HOME`, `XDG_CONFIG_HOME` where
/// those are in use. `None` where there is no home.
pub fn places() -> Option<Places> {
    let dirs = ProjectDirs::from("", "", "rackside")?;
    Some(Places {
        data: dirs.data_dir().to_path_buf(),
        state: dirs
            .state_dir()
            .unwrap_or_else(|| dirs.data_local_dir())
            .to_path_buf(),
        config: dirs.config_dir().to_path_buf(),
    })
}
