//! Dimension scales: how HDF5 says that one dataset is the axis of another.
//!
//! Written by hand after "HDF5 Dimension Scale Specification and Design Notes" (The HDF Group, 2005; attributes CLASS,
//! NAME, REFERENCE_LIST, DIMENSION_LIST), because the bundled library is built without its high-level part.
//! CLASS and NAME are the only fixed-length strings in a trial file: that document asks for them.

use hdf5::types::VarLenArray;
use hdf5::{Dataset, Datatype, H5Type, ObjectReference1};

use super::error::{Doing, TrialError};

/// Where a scale is used: the dataset and which of its dimensions.
#[derive(Clone, Copy, H5Type)]
#[repr(C)]
struct Use {
    dataset: ObjectReference1,
    dimension: i32,
}

/// Makes `scale` the axis of every one of `datasets` (each with one dimension).
pub(super) fn attach(scale: &Dataset, name: &str, datasets: &[&Dataset]) -> Result<(), TrialError> {
    let object = scale.name();
    put_fixed_text(scale, "CLASS", "DIMENSION_SCALE").doing("writing the dimension scale of", &object)?;
    put_fixed_text(scale, "NAME", name).doing("writing the dimension scale of", &object)?;
    link(scale, datasets).doing("attaching the dimension scale", object)
}

fn link(scale: &Dataset, datasets: &[&Dataset]) -> hdf5::Result<()> {
    let mut uses = Vec::with_capacity(datasets.len());
    let axis: ObjectReference1 = scale.reference(".")?;
    for dataset in datasets {
        let axes = [VarLenArray::from_slice(&[axis])];
        dataset.new_attr::<VarLenArray<ObjectReference1>>().shape(1).create("DIMENSION_LIST")?.write(&axes)?;
        uses.push(Use { dataset: dataset.reference(".")?, dimension: 0 });
    }
    if !uses.is_empty() {
        scale.new_attr::<Use>().shape(uses.len()).create("REFERENCE_LIST")?.write(&uses)?;
    }
    Ok(())
}

fn put_fixed_text(at: &Dataset, name: &str, text: &str) -> hdf5::Result<()> {
    let stored = null_terminated(text.len() + 1)?;
    let attribute = at.new_attr_builder().empty_as(stored).create(name)?;
    write_fixed(&attribute, text)
}

/// ASCII string type of `n_bytes`, closed by NUL: the crate only makes NUL-padded ones, which scale readers refuse.
fn null_terminated(n_bytes: usize) -> hdf5::Result<Datatype> {
    hdf5::sync::sync(|| {
        // SAFETY: under the library's lock; H5T_C_S1 lives as long as the library; the copy is ours, and `from_id`
        // takes over its only reference. `n_bytes` is at least one, all that H5Tset_size asks of a string type.
        unsafe {
            let id = hdf5_sys::h5t::H5Tcopy(*hdf5::globals::H5T_C_S1);
            if hdf5_sys::h5t::H5Tset_size(id, n_bytes) < 0 {
                return Err(hdf5::Error::Internal("H5Tset_size refused a string size".to_owned()));
            }
            hdf5::from_id(id)
        }
    })
}

fn write_fixed(attribute: &hdf5::Attribute, text: &str) -> hdf5::Result<()> {
    let dtype = attribute.dtype()?;
    let mut bytes = vec![0_u8; dtype.size()];
    bytes.iter_mut().zip(text.bytes()).for_each(|(to, from)| *to = from);
    let status = hdf5::sync::sync(|| {
        // SAFETY: under the library's lock; both handles are alive; the buffer is exactly one element of the
        // attribute's own type, which is a scalar.
        unsafe { hdf5_sys::h5a::H5Awrite(attribute.id(), dtype.id(), bytes.as_ptr().cast()) }
    });
    if status < 0 { Err(hdf5::Error::Internal("H5Awrite refused a scale's text".to_owned())) } else { Ok(()) }
}
