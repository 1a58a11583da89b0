//! One daemon at a time writes to a record folder.

use super::RecordError;
use std::fs::{File, TryLockError};
use std::io::Write;
use std::path::Path;

/// Name of the file whose lock says that a daemon uses the folder.
const LOCK_NAME: &str = "holdtrue.lock";

/// Makes the folder if need be, and takes its lock, which holds for as long as the file is open.
pub(super) fn lock(folder: &Path) -> Result<File, RecordError> {
    let failed = |source| RecordError::Folder {
        folder: folder.to_path_buf(),
        source,
    };
    std::fs::create_dir_all(folder).map_err(failed)?;
    let path = folder.join(LOCK_NAME);
    let mut file = File::options()
        .create(true)
        .truncate(false)
        .read(true)
        .write(true)
        .open(&path)
        .map_err(failed)?;
    match file.try_lock() {
        Ok(()) => {}
        Err(TryLockError::WouldBlock) => {
            let holder = std::fs::read_to_string(&path).unwrap_or_default();
            return Err(RecordError::InUse {
                folder: folder.to_path_buf(),
                holder: holder.trim().to_owned(),
            });
        }
        Err(TryLockError::Error(error)) => return Err(failed(error)),
    }
    // Only for the message that a second daemon shows; the lock itself is what counts.
    file.set_len(0)
        .and_then(|()| writeln!(file, "{}", std::process::id()))
        .map_err(failed)?;
    Ok(file)
}
