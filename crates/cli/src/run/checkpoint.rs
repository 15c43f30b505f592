//! The newest complete state on the disk: what a run needs to go on bit for bit.
//!
//! A file is a header (magic, format, sizes, SHA-256 of the rest) and an LZ4 block of postcard bytes. It is written
//! beside the old one, flushed, and moved into place; the old one stays as `checkpoint.previous`. Nothing in the file
//! is believed: sizes are bounded before memory is taken, the hash is checked before anything is decoded, and what
//! was decoded is checked before it is used.

use super::cursor::Cursor;
use super::plan::Plan;
use super::summary::Accounts;
use crate::failure::Failure;
use pellicle_physics::step::memory::Memory;
use pellicle_physics::{Simulation, State};
use serde::{Deserialize, Serialize};
use sha2::{Digest, Sha256};
use std::fs::{self, File};
use std::io::{self, Read, Write};
use std::path::Path;

/// Name of the newest checkpoint.
pub const CHECKPOINT_FILE: &str = "checkpoint";
/// Name of the one before.
pub const PREVIOUS_FILE: &str = "checkpoint.previous";
/// Name while it is being written.
pub const UNFINISHED_FILE: &str = "checkpoint.unfinished";

const MAGIC: [u8; 8] = *b"PELLICKP";
/// Counts up with every change of what a checkpoint holds.
const FORMAT: u32 = 2;
const HEADER: usize = 8 + 4 + 4 + 4 + 32;
/// Most bytes, packed or unpacked: enough for 330,000 vertices (about 290 bytes each). Whatever such a file says, reading
/// it takes less than 1 GB: small numbers grow to at most four times their size in memory, lists by doubling.
const MOST_BYTES: usize = 96 << 20;

/// A complete run at one moment.
#[derive(Clone, Debug, PartialEq, Serialize, Deserialize)]
pub struct Checkpoint {
    /// Version of the program that wrote it.
    pub program: String,
    /// What does not change.
    pub plan: Plan,
    /// State of the membrane.
    pub state: State,
    /// What the simulation remembers beside it.
    pub memory: Memory,
    /// What has been written.
    pub cursor: Cursor,
    /// Time spent: the only part that differs between two runs of the same scenario.
    pub accounts: Accounts,
}

/// Why a file is no checkpoint.
#[derive(Debug, thiserror::Error)]
pub enum CheckpointError {
    /// The system refused.
    #[error("{0}")]
    System(#[from] io::Error),
    /// Too large, to write or to read.
    #[error("it takes {0} bytes, more than the {MOST_BYTES} a checkpoint may have")]
    Size(u64),
    /// Not a checkpoint, or of another format.
    #[error("{0}")]
    Kind(String),
    /// Damaged.
    #[error("it is damaged ({0})")]
    Damaged(&'static str),
}

impl Checkpoint {
    /// The moment a simulation is at.
    pub fn of(plan: &Plan, simulation: &Simulation, cursor: &Cursor, accounts: &Accounts) -> Self {
        Self {
            program: env!("CARGO_PKG_VERSION").to_owned(),
            plan: plan.clone(),
            state: simulation.state.clone(),
            memory: simulation.memory(),
            cursor: cursor.clone(),
            accounts: accounts.clone(),
        }
    }

    /// The bytes of a checkpoint file.
    ///
    /// # Errors
    /// [`CheckpointError::Size`] for a surface too large.
    pub fn encode(&self) -> Result<Vec<u8>, CheckpointError> {
        let plain = postcard::to_stdvec(self).map_err(|_| CheckpointError::Damaged("it cannot be encoded"))?;
        let packed = lz4_flex::block::compress(&plain);
        let size = |bytes: &[u8]| match u32::try_from(bytes.len()) {
            Ok(size) if bytes.len() <= MOST_BYTES => Ok(size),
            _ => Err(CheckpointError::Size(bytes.len() as u64)),
        };
        let (plain_size, packed_size) = (size(&plain)?, size(&packed)?);
        let mut file = Vec::with_capacity(HEADER + packed.len());
        file.extend_from_slice(&MAGIC);
        file.extend_from_slice(&FORMAT.to_le_bytes());
        file.extend_from_slice(&plain_size.to_le_bytes());
        file.extend_from_slice(&packed_size.to_le_bytes());
        let hash = hash_of(&file, &packed);
        file.extend_from_slice(&hash);
        file.extend_from_slice(&packed);
        Ok(file)
    }

    /// Read the bytes of a checkpoint file.
    ///
    /// # Errors
    /// [`CheckpointError`]: what is wrong with them.
    pub fn decode(file: &[u8]) -> Result<Self, CheckpointError> {
        let (header, packed) = file
            .split_at_checked(HEADER)
            .ok_or_else(|| CheckpointError::Kind("it is too short for a checkpoint".into()))?;
        let word = |at: usize| u32::from_le_bytes([header[at], header[at + 1], header[at + 2], header[at + 3]]);
        if header[..8] != MAGIC {
            return Err(CheckpointError::Kind("it is no checkpoint of this program".into()));
        }
        if word(8) != FORMAT {
            return Err(CheckpointError::Kind(format!(
                "its format is {}, this program reads format {FORMAT}: use the version that wrote it",
                word(8)
            )));
        }
        let (plain_size, packed_size) = (word(12) as usize, word(16) as usize);
        if plain_size.max(packed_size) > MOST_BYTES {
            return Err(CheckpointError::Size(plain_size.max(packed_size) as u64));
        }
        if packed.len() != packed_size {
            return Err(CheckpointError::Damaged("its length is wrong"));
        }
        if header[20..] != hash_of(&header[..20], packed) {
            return Err(CheckpointError::Damaged("its checksum is wrong"));
        }
        Self::decode_content(packed, plain_size)
    }

    /// Read what stands behind the header.
    fn decode_content(packed: &[u8], plain_size: usize) -> Result<Self, CheckpointError> {
        let plain = lz4_flex::block::decompress(packed, plain_size)
            .map_err(|_| CheckpointError::Damaged("it cannot be unpacked"))?;
        let checkpoint: Self =
            postcard::from_bytes(&plain).map_err(|_| CheckpointError::Damaged("it cannot be decoded"))?;
        drop(plain);
        match checkpoint.plan.fault().or_else(|| checkpoint.state_fault()) {
            Some(fault) => Err(CheckpointError::Damaged(fault)),
            None => Ok(checkpoint),
        }
    }

    /// What cannot be in a state, if anything. The physics takes the lengths of its lists for granted.
    fn state_fault(&self) -> Option<&'static str> {
        let state = &self.state;
        let n = state.mesh.n_vertices();
        let full = |length: usize| length == n;
        let optional = |length: usize| length == 0 || length == n;
        if !(full(state.lipid.len())
            && full(state.tension.len())
            && full(state.velocity.len())
            && optional(state.composition_amount.len())
            && optional(state.bound_amount.len())
            && optional(state.marker_amount.len())
            && optional(state.rim_normals.len())
            && state.pieces.len() <= n)
        {
            return Some("its fields do not belong to its surface");
        }
        if state.loads.len() != self.plan.parameters.loads.len() {
            return Some("its loads do not belong to its scenario");
        }
        if state.mesh.triangles.iter().flatten().any(|&v| v as usize >= n) {
            return Some("its triangles have corners that do not exist");
        }
        let positive = |x: f64| x > 0.0 && x.is_finite();
        let finite = |v: &pellicle_surface::Vec3| v.iter().all(|x| x.is_finite());
        if !positive(state.step)
            || !(state.time >= 0.0 && state.time.is_finite())
            || !state.mesh.positions.iter().all(finite)
            || !self.memory.ordered_at.iter().all(finite)
            || !self.memory.origin.iter().all(|then| {
                positive(then.step) && then.positions.iter().all(finite) && then.lipid.iter().all(|m| positive(*m))
            })
            || !state.lipid.iter().all(|m| positive(*m))
            || !state.mesh.period.is_none_or(positive)
            || !state.pieces.iter().all(|piece| piece.share.is_finite() && piece.pressure.is_finite())
        {
            return Some("its numbers are not finite");
        }
        None
    }

    /// SHA-256 of all that decides how the run goes on, in hexadecimal: equal for equal runs.
    pub fn fingerprint(&self) -> String {
        let bytes = postcard::to_stdvec(&(&self.state, &self.memory, &self.cursor)).unwrap_or_default();
        hexadecimal(&Sha256::digest(bytes))
    }

    /// Make this the newest checkpoint of a directory, keeping the one before.
    ///
    /// # Errors
    /// [`Failure::Files`]; the old checkpoints are then still there.
    pub fn write(&self, folder: &Path) -> Result<(), Failure> {
        let newest = folder.join(CHECKPOINT_FILE);
        let bytes = self
            .encode()
            .map_err(|error| Failure::Files(format!("cannot write {}: {error}", newest.display())))?;
        let unfinished = folder.join(UNFINISHED_FILE);
        let written = File::create(&unfinished).and_then(|mut file| {
            file.write_all(&bytes)?;
            file.sync_all()
        });
        if let Err(error) = written {
            let _ = fs::remove_file(&unfinished);
            return Err(Failure::system("write", &newest, &error));
        }
        keep_previous(folder)
            .and_then(|()| fs::rename(&unfinished, &newest))
            .and_then(|()| sync_folder(folder))
            .map_err(|error| Failure::system("replace", &newest, &error))
    }

    /// Read a checkpoint file.
    ///
    /// # Errors
    /// [`CheckpointError`].
    pub fn read(path: &Path) -> Result<Self, CheckpointError> {
        let file = File::open(path)?;
        let length = file.metadata()?.len();
        let most = (HEADER + MOST_BYTES) as u64;
        if length > most {
            return Err(CheckpointError::Size(length));
        }
        let mut bytes = Vec::new();
        file.take(most).read_to_end(&mut bytes)?;
        Self::decode(&bytes)
    }
}

/// The newest checkpoint of a directory that can be read, and what was wrong with a newer one.
///
/// # Errors
/// [`Failure::Files`] when there is none.
pub fn newest(folder: &Path) -> Result<(Checkpoint, Option<String>), Failure> {
    let path = folder.join(CHECKPOINT_FILE);
    let first = match Checkpoint::read(&path) {
        Ok(checkpoint) => return Ok((checkpoint, None)),
        Err(error) => error,
    };
    let problem = format!("{} cannot be used: {first}", path.display());
    match Checkpoint::read(&folder.join(PREVIOUS_FILE)) {
        Ok(checkpoint) => Ok((checkpoint, Some(format!("{problem}; the one before it is used")))),
        Err(second) => {
            let missing = |error: &CheckpointError| {
                matches!(error, CheckpointError::System(error) if error.kind() == io::ErrorKind::NotFound)
            };
            Err(Failure::Files(if missing(&first) && missing(&second) {
                format!(
                    "{} holds no checkpoint: no run is there, or it ended before its first one; \
                     start it with `pellicle run` (and --force if files of it are in the way)",
                    folder.display()
                )
            } else {
                format!("{problem}; nor can the one before it: {second}; start again with `pellicle run --force`")
            }))
        }
    }
}

/// Keep the newest checkpoint under its second name, without a moment in which there is none.
fn keep_previous(folder: &Path) -> io::Result<()> {
    let (newest, previous) = (folder.join(CHECKPOINT_FILE), folder.join(PREVIOUS_FILE));
    if !newest.exists() {
        return Ok(());
    }
    let link = folder.join("checkpoint.link");
    let _ = fs::remove_file(&link);
    match fs::hard_link(&newest, &link) {
        Ok(()) => fs::rename(&link, &previous),
        // No hard links here: for a moment there is only the previous one, which `newest` finds, too.
        Err(_) => fs::rename(&newest, &previous),
    }
}

/// Bring the names in a directory onto the disk.
fn sync_folder(folder: &Path) -> io::Result<()> {
    if cfg!(unix) { File::open(folder)?.sync_all() } else { Ok(()) }
}

fn hash_of(header: &[u8], packed: &[u8]) -> [u8; 32] {
    let mut hash = Sha256::new();
    hash.update(header);
    hash.update(packed);
    hash.finalize().into()
}

/// Bytes in hexadecimal.
pub fn hexadecimal(bytes: &[u8]) -> String {
    bytes.iter().map(|byte| format!("{byte:02x}")).collect()
}

#[cfg(test)]
#[path = "checkpoint_tests.rs"]
mod tests;
