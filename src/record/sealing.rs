//! A finished file is sealed: brought to rest (log folded in, indexes made, one plain file) and its
//! checksum written beside it, as `sha256sum --check` reads it.
//!
//! Every step can be repeated, so a seal that was broken off is simply made again.

use super::chain::Digest;
use super::disk::{Disk, Operation};
use super::{DayName, RecordError, layout};
use sha2::{Digest as _, Sha256};
use std::fs::File;
use std::io::{Read, Write};
use std::path::Path;

/// How much of a file is read at once.
const CHUNK: usize = 1 << 20;

/// Seals the file `name` in `folder`; its checksum.
///
/// # Errors
/// When the disk refuses.
pub(super) fn seal(
    folder: &Path,
    name: DayName,
    disk: &mut dyn Disk,
) -> Result<Digest, RecordError> {
    let path = folder.join(name.to_string());
    let failed = |path: &Path| {
        let folder = path.to_path_buf();
        move |source| RecordError::Folder { folder, source }
    };
    let told = told_checksum(folder, name)?;
    if let Some(digest) = told.as_deref().and_then(digest_of)
        && digest == checksum(&path)?
    {
        // Sealed already. Its bytes were told to the world and must stay: opening it to write, even
        // without writing, would change some.
        return Ok(digest);
    }
    disk.before(Operation::Rest, &path).map_err(failed(&path))?;
    rest(&path).map_err(|error| error.of(&path))?;
    disk.after(Operation::Rest, &path).map_err(failed(&path))?;
    let digest = checksum(&path)?;
    let beside = folder.join(name.checksum());
    disk.before(Operation::Checksum, &beside)
        .map_err(failed(&beside))?;
    write_whole(folder, &beside, &format!("{digest}  {name}\n")).map_err(failed(&beside))?;
    disk.after(Operation::Checksum, &beside)
        .map_err(failed(&beside))?;
    Ok(digest)
}

/// The digest in the text of a checksum file.
fn digest_of(text: &str) -> Option<Digest> {
    text.split_whitespace().next()?.parse().ok()
}

/// Brings a file to rest.
fn rest(path: &Path) -> Result<(), RecordError> {
    let connection = layout::open_to_write(path)?;
    connection.execute_batch(layout::REST_INDEXES)?;
    connection.pragma_update(None, "journal_mode", "DELETE")?;
    connection.close().map_err(|(_, error)| error)?;
    Ok(())
}

/// SHA-256 of a whole file.
///
/// # Errors
/// When it can't be read.
pub(super) fn checksum(path: &Path) -> Result<Digest, RecordError> {
    let read = || -> std::io::Result<Digest> {
        let mut file = File::open(path)?;
        let mut hash = Sha256::new();
        let mut chunk = vec![0; CHUNK];
        loop {
            match file.read(&mut chunk)? {
                0 => return Ok(Digest(hash.finalize().into())),
                read => hash.update(&chunk[..read]),
            }
        }
    };
    read().map_err(|source| RecordError::Folder {
        folder: path.to_path_buf(),
        source,
    })
}

/// The checksum that stands beside a file; `None` if none does.
///
/// # Errors
/// When it can't be read.
pub(super) fn told_checksum(folder: &Path, name: DayName) -> Result<Option<String>, RecordError> {
    let beside = folder.join(name.checksum());
    match std::fs::read_to_string(&beside) {
        Ok(text) => Ok(Some(text)),
        Err(error) if error.kind() == std::io::ErrorKind::NotFound => Ok(None),
        // Not text: as good as a wrong one.
        Err(error) if error.kind() == std::io::ErrorKind::InvalidData => Ok(Some(String::new())),
        Err(source) => Err(RecordError::Folder {
            folder: beside,
            source,
        }),
    }
}

/// Writes a file so that it is there whole or not at all.
fn write_whole(folder: &Path, path: &Path, text: &str) -> std::io::Result<()> {
    let draft = path.with_extension("draft");
    let mut file = File::create(&draft)?;
    file.write_all(text.as_bytes())?;
    file.sync_all()?;
    std::fs::rename(&draft, path)?;
    File::open(folder)?.sync_all()
}
