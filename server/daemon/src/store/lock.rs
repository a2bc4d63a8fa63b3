//! One daemon a store: an advisory lock that the system drops with the process, however it ends.

use std::{
    fs::{File, OpenOptions, TryLockError},
    path::Path,
};

use super::StoreError;

/// Held while the store is open.
#[derive(Debug)]
pub(super) struct Lock {
    /// Closing the file lets go of the lock.
    _file: File,
}

impl Lock {
    /// Makes the folder if it is missing, and takes its lock.
    pub(super) fn take(folder: &Path) -> Result<Self, StoreError> {
        let failed = |source| StoreError::Folder {
            path: folder.to_path_buf(),
            source,
        };
        std::fs::create_dir_all(folder).map_err(failed)?;
        let mut options = OpenOptions::new();
        options.create(true).write(true).truncate(false);
        let file = options.open(folder.join("lock")).map_err(failed)?;
        match file.try_lock() {
            Ok(()) => Ok(Self { _file: file }),
            Err(TryLockError::WouldBlock) => Err(StoreError::InUse(folder.to_path_buf())),
            Err(TryLockError::Error(source)) => Err(failed(source)),
        }
    }
}
