//! One growing 1-D dataset: collects a whole chunk before it touches the library, and digests what it wrote.
//!
//! Filters: shuffle, deflate 1, fletcher32, applied by [`ChunkWriter`]. A chunk stays at or under 256 KiB, so that readers before HDF5 2.0 (1 MiB
//! chunk cache) read it at full speed. Memory: a few chunks of buffer a column.
//! Elements are stored as they lie in memory, which is little-endian wherever this is built.
//!
//! A dataset is closed only after a flush that worked. Closing writes what the cache still holds and tells nobody when
//! that fails; and once it failed, the library (2.2) crashes in a later close. So after any error the handle is left
//! open for good: the file is worthless then, and the process is about to say so and end.

use std::mem::ManuallyDrop;

use hdf5::types::{TypeDescriptor, VarLenUnicode};
use hdf5::{Dataset, Group, H5Type, Hyperslab};
use sha2::{Digest, Sha256};

use super::attribute::{expect_type, full_name, loaded_text, put_text, stored_text};
use super::chunk::ChunkWriter;
use super::digest::DatasetDigest;
use super::error::{Doing, TrialError};

/// Samples a chunk of counts, values and times.
pub(super) const SAMPLES_PER_CHUNK: usize = 32 * 1024;
/// Rows a chunk of small tables.
pub(super) const ROWS_PER_CHUNK: usize = 4 * 1024;
/// Rows a chunk of texts: unfiltered, and stored whole, so that a few words of a small table do not cost 64 KiB.
const TEXTS_PER_CHUNK: usize = 64;
const CACHE_BYTES: usize = 1 << 20;
/// HDF5's advice: a prime about 100 times the number of chunks that fit the cache.
const CACHE_SLOTS: usize = 521;
const DEFLATE_LEVEL: u8 = 1;
/// No deflate stream expands further (zlib's own statement: "1032:1", zlib technical details page).
pub(super) const DEFLATE_RATIO_MAX: u64 = 1032;

/// A value that a column stores.
pub(super) trait Cell: Sized {
    type Stored: H5Type + Clone;
    /// Byte order, kind and width as in the array interface of NumPy; `utf8` for text. Part of the raw digest.
    const CODE: &'static str;
    fn store(&self) -> Self::Stored;
    fn load(stored: Self::Stored) -> Self;
    /// Little-endian bytes of the value; texts as u32 length and UTF-8.
    fn put_le(stored: &Self::Stored, out: &mut Vec<u8>);
}

macro_rules! number_cell {
    ($($number:ty => $code:literal),*) => {$(
        impl Cell for $number {
            type Stored = $number;
            const CODE: &'static str = $code;
            fn store(&self) -> $number {
                *self
            }
            fn load(stored: $number) -> Self {
                stored
            }
            fn put_le(stored: &$number, out: &mut Vec<u8>) {
                out.extend_from_slice(&stored.to_le_bytes());
            }
        }
    )*};
}
number_cell!(u8 => "|u1", u16 => "<u2", u32 => "<u4", u64 => "<u8", i32 => "<i4", i64 => "<i8", f32 => "<f4", f64 => "<f8");

impl Cell for bool {
    type Stored = bool;
    const CODE: &'static str = "|b1";
    fn store(&self) -> bool {
        *self
    }
    fn load(stored: bool) -> Self {
        stored
    }
    fn put_le(stored: &bool, out: &mut Vec<u8>) {
        out.push(u8::from(*stored));
    }
}

impl Cell for String {
    type Stored = VarLenUnicode;
    const CODE: &'static str = "utf8";
    fn store(&self) -> VarLenUnicode {
        stored_text(self)
    }
    fn load(stored: VarLenUnicode) -> Self {
        loaded_text(&stored)
    }
    fn put_le(stored: &VarLenUnicode, out: &mut Vec<u8>) {
        let length = u32::try_from(stored.len()).unwrap_or(u32::MAX);
        out.extend_from_slice(&length.to_le_bytes());
        out.extend_from_slice(stored.as_bytes());
    }
}

/// A growing dataset of `T`.
pub(super) struct Column<T: Cell> {
    /// `None` for texts, which the library stores on its heap.
    chunks: Option<ChunkWriter>,
    dataset: ManuallyDrop<Dataset>,
    waiting: Vec<T::Stored>,
    n_written: usize,
    chunk: usize,
    values: Sha256,
    bytes: Vec<u8>,
}

impl<T: Cell> Column<T> {
    pub(super) fn create(group: &Group, name: &str, unit: &str, chunk: usize) -> Result<Self, TrialError> {
        let is_number = !matches!(T::Stored::type_descriptor(), TypeDescriptor::VarLenUnicode);
        let chunk = if is_number { chunk } else { chunk.min(TEXTS_PER_CHUNK) };
        let mut builder = group.new_dataset::<T::Stored>().obj_track_times(false).chunk(chunk);
        builder = builder.chunk_cache(CACHE_SLOTS, CACHE_BYTES, 0.75);
        if is_number {
            builder = builder.shuffle().deflate(DEFLATE_LEVEL).fletcher32();
        }
        let dataset = builder.shape(0..).create(name).doing("creating dataset", full_name(group, name))?;
        if !unit.is_empty() {
            put_text(&dataset, "units", unit)?;
        }
        let dataset = ManuallyDrop::new(dataset);
        let chunks = is_number.then(|| ChunkWriter::new(DEFLATE_LEVEL));
        Ok(Self { chunks, dataset, waiting: Vec::new(), n_written: 0, chunk, values: Sha256::new(), bytes: Vec::new() })
    }

    pub(super) fn dataset(&self) -> &Dataset {
        &self.dataset
    }

    pub(super) fn push(&mut self, value: &T) -> Result<(), TrialError> {
        self.waiting.push(value.store());
        self.write_full_chunks()
    }

    pub(super) fn extend(&mut self, values: &[T]) -> Result<(), TrialError> {
        for part in values.chunks(self.chunk) {
            self.waiting.extend(part.iter().map(Cell::store));
            self.write_full_chunks()?;
        }
        Ok(())
    }

    fn write_full_chunks(&mut self) -> Result<(), TrialError> {
        while self.waiting.len() >= self.chunk {
            self.write(self.chunk)?;
        }
        Ok(())
    }

    /// Writes the next chunk, whole but for the last one of a dataset.
    fn write(&mut self, n: usize) -> Result<(), TrialError> {
        let Self { dataset, waiting, n_written, bytes, .. } = self;
        bytes.clear();
        waiting[..n].iter().for_each(|value| T::put_le(value, bytes));
        self.values.update(&*bytes);
        dataset.resize(*n_written + n).doing("extending", dataset.name())?;
        if let Some(chunks) = &mut self.chunks {
            let width = size_of::<T::Stored>();
            bytes.resize(self.chunk * width, 0); // a chunk is stored whole
            chunks.write(dataset, *n_written, bytes, width)?;
        } else {
            let texts = dataset.write_slice(&waiting[..n], Hyperslab::from(*n_written..*n_written + n));
            texts.doing("appending to", dataset.name())?;
        }
        self.waiting.drain(..n);
        self.n_written += n;
        Ok(())
    }

    /// What was appended between two indices.
    pub(super) fn read_back(&self, from: usize, to: usize) -> Result<Vec<T>, TrialError> {
        let (first, last) = (from.min(self.n_written), to.min(self.n_written));
        let stored = self.dataset.read_slice_1d::<T::Stored, _>(Hyperslab::from(first..last));
        let mut values: Vec<T> =
            stored.doing("reading", self.dataset.name())?.to_vec().into_iter().map(T::load).collect();
        let waiting = from.saturating_sub(self.n_written)..to.saturating_sub(self.n_written).min(self.waiting.len());
        values.extend(self.waiting[waiting].iter().cloned().map(T::load));
        Ok(values)
    }

    /// Writes what waits and gives the digest under `name` (its path within the digested group).
    pub(super) fn finish(mut self, name: &str) -> Result<DatasetDigest, TrialError> {
        if !self.waiting.is_empty() {
            self.write(self.waiting.len())?;
        }
        self.dataset.flush().doing("flushing", self.dataset.name())?;
        drop(ManuallyDrop::into_inner(self.dataset));
        Ok(DatasetDigest::new(name, T::CODE, &[self.n_written as u64], self.values))
    }
}

/// A dataset of `T`, opened and checked: 1-D, of the documented type, stored inside the file, not larger than its
/// stored bytes can hold.
pub(super) struct OpenColumn<T> {
    dataset: Dataset,
    len: usize,
    of: std::marker::PhantomData<T>,
}

impl<T: Cell> OpenColumn<T> {
    pub(super) fn new(dataset: Dataset) -> Result<Self, TrialError> {
        let object = dataset.name();
        expect_type(&dataset, T::Stored::type_descriptor(), &object, T::CODE)?;
        let shape = dataset.get_shape().doing("reading the shape of", &object)?;
        let [len] = shape[..] else {
            let found = format!("{} dimensions", shape.len());
            return Err(TrialError::WrongType { object, found, expected: "one dimension" });
        };
        refuse_foreign_storage(&dataset)?;
        let declared_bytes = (len as u64).saturating_mul(size_of::<T::Stored>() as u64);
        let stored_bytes = dataset.storage_size();
        if declared_bytes > stored_bytes.saturating_mul(DEFLATE_RATIO_MAX) {
            return Err(TrialError::TooLarge { object, declared_bytes, stored_bytes });
        }
        Ok(Self { dataset, len, of: std::marker::PhantomData })
    }

    pub(super) fn len(&self) -> usize {
        self.len
    }

    pub(super) fn read(&self, from: usize, to: usize) -> Result<Vec<T>, TrialError> {
        Ok(self.read_stored(from, to)?.into_iter().map(T::load).collect())
    }

    pub(super) fn read_all(&self) -> Result<Vec<T>, TrialError> {
        self.read(0, self.len)
    }

    fn read_stored(&self, from: usize, to: usize) -> Result<Vec<T::Stored>, TrialError> {
        let (to, from) = (to.min(self.len), from.min(to.min(self.len)));
        if from == to {
            return Ok(Vec::new());
        }
        let values = self.dataset.read_slice_1d::<T::Stored, _>(Hyperslab::from(from..to));
        Ok(values.doing("reading", self.dataset.name())?.to_vec())
    }

    /// The digest of what the file holds now, read a chunk at a time.
    pub(super) fn digest(&self, name: &str) -> Result<DatasetDigest, TrialError> {
        let mut values = Sha256::new();
        let mut bytes = Vec::new();
        for from in (0..self.len).step_by(SAMPLES_PER_CHUNK) {
            bytes.clear();
            let part = self.read_stored(from, from + SAMPLES_PER_CHUNK)?;
            part.iter().for_each(|value| T::put_le(value, &mut bytes));
            values.update(&bytes);
        }
        Ok(DatasetDigest::new(name, T::CODE, &[self.len as u64], values))
    }
}

/// Refuses data kept in other files and filters that the format never uses (they could load foreign code).
fn refuse_foreign_storage(dataset: &Dataset) -> Result<(), TrialError> {
    use hdf5::dataset::Layout;
    use hdf5::filters::Filter;
    let object = dataset.name();
    let foreign = |what| Err(TrialError::Foreign { object: object.clone(), what });
    if matches!(dataset.layout(), Layout::Virtual) {
        return foreign("virtual dataset");
    }
    let plist = dataset.dcpl().doing("reading the storage of", &object)?;
    if !plist.external().is_empty() {
        return foreign("external storage");
    }
    if plist.has_filters_beyond(|filter| matches!(filter, Filter::Deflate(_) | Filter::Shuffle | Filter::Fletcher32)) {
        return foreign("unknown filter");
    }
    Ok(())
}

trait Filtered {
    fn has_filters_beyond(&self, known: impl Fn(&hdf5::filters::Filter) -> bool) -> bool;
}

impl Filtered for hdf5::plist::DatasetCreate {
    fn has_filters_beyond(&self, known: impl Fn(&hdf5::filters::Filter) -> bool) -> bool {
        !self.filters().iter().all(known)
    }
}
