//! Attributes and groups: variable-length UTF-8 strings and fixed-width numbers only, no object timestamps.

use hdf5::types::{TypeDescriptor, VarLenUnicode};
use hdf5::{Dataset, Group, H5Type, Location};

use super::column::Cell;
use super::error::{Doing, TrialError};

/// A string as the file stores it. HDF5 ends strings at NUL, so NUL is stored as U+2400 (its visible symbol).
pub(super) fn stored_text(text: &str) -> VarLenUnicode {
    let clean = text.replace('\0', "\u{2400}");
    // Without NUL the conversion has nothing left to refuse; the fallback keeps the type honest.
    clean.parse().unwrap_or_default()
}

/// A string as it lies in a file, which may be damaged: the library's type promises UTF-8 without having looked. What is none
/// becomes U+FFFD; digests are over the bytes.
pub(super) fn loaded_text(stored: &VarLenUnicode) -> String {
    String::from_utf8_lossy(stored.as_bytes()).into_owned()
}

pub(super) fn put_text(at: &Location, name: &str, text: &str) -> Result<(), TrialError> {
    put_number(at, name, stored_text(text))
}

pub(super) fn put_number<T: H5Type>(at: &Location, name: &str, value: T) -> Result<(), TrialError> {
    let create = || at.new_attr::<T>().create(name)?.write_scalar(&value);
    create().doing("writing attribute", full_name(at, name))
}

/// Writes a list of strings, as NeXus wants it for `axes`.
pub(super) fn put_texts(at: &Location, name: &str, texts: &[&str]) -> Result<(), TrialError> {
    let stored: Vec<VarLenUnicode> = texts.iter().map(|text| stored_text(text)).collect();
    let create = || at.new_attr::<VarLenUnicode>().shape(stored.len()).create(name)?.write(&stored);
    create().doing("writing attribute", full_name(at, name))
}

/// Writes a list of numbers.
pub(super) fn put_numbers<T: H5Type>(at: &Location, name: &str, values: &[T]) -> Result<(), TrialError> {
    let create = || at.new_attr::<T>().shape(values.len()).create(name)?.write(values);
    create().doing("writing attribute", full_name(at, name))
}

/// Creates a group with its NeXus class.
pub(super) fn new_group(parent: &Group, name: &str, nexus_class: &str) -> Result<Group, TrialError> {
    let group = parent.create_group_builder().obj_track_times(false).create(name);
    let group = group.doing("creating group", full_name(parent, name))?;
    put_text(&group, "NX_class", nexus_class)?;
    Ok(group)
}

/// A whole text as a scalar dataset (attributes above 64 KiB need storage that old readers lack).
pub(super) fn put_text_dataset(parent: &Group, name: &str, text: &str) -> Result<Dataset, TrialError> {
    let create = || {
        let dataset = parent.new_dataset::<VarLenUnicode>().obj_track_times(false).create(name)?;
        dataset.write_scalar(&stored_text(text))?;
        Ok(dataset)
    };
    create().doing("writing text", full_name(parent, name))
}

/// A number with a name of its own, as a scalar dataset.
pub(super) fn put_number_dataset<T: H5Type>(parent: &Group, name: &str, value: T) -> Result<Dataset, TrialError> {
    let create = || {
        let dataset = parent.new_dataset::<T>().obj_track_times(false).create(name)?;
        dataset.write_scalar(&value)?;
        Ok(dataset)
    };
    create().doing("writing number", full_name(parent, name))
}

pub(super) fn get_text(at: &Location, name: &str) -> Result<String, TrialError> {
    let object = full_name(at, name);
    let attribute = at.attr(name).map_err(|_| TrialError::Missing { object: object.clone() })?;
    expect_type(&attribute, TypeDescriptor::VarLenUnicode, &object, "a variable-length UTF-8 string")?;
    let text: VarLenUnicode = attribute.read_scalar().doing("reading attribute", object)?;
    Ok(loaded_text(&text))
}

pub(super) fn get_number<T: H5Type>(at: &Location, name: &str) -> Result<T, TrialError> {
    let object = full_name(at, name);
    let attribute = at.attr(name).map_err(|_| TrialError::Missing { object: object.clone() })?;
    expect_type(&attribute, T::type_descriptor(), &object, "a number of the documented width")?;
    attribute.read_scalar().doing("reading attribute", object)
}

/// The attribute if it is there: for what the format leaves out when it is not known.
pub(super) fn get_optional_number<T: H5Type>(at: &Location, name: &str) -> Result<Option<T>, TrialError> {
    match get_number(at, name) {
        Ok(value) => Ok(Some(value)),
        Err(TrialError::Missing { .. }) => Ok(None),
        Err(other) => Err(other),
    }
}

/// The list of an attribute; empty where there is none.
pub(super) fn get_list<T: Cell>(at: &Location, name: &str) -> Result<Vec<T>, TrialError> {
    let object = full_name(at, name);
    let Ok(attribute) = at.attr(name) else { return Ok(Vec::new()) };
    expect_type(&attribute, T::Stored::type_descriptor(), &object, T::CODE)?;
    Ok(attribute.read_raw::<T::Stored>().doing("reading attribute", object)?.into_iter().map(T::load).collect())
}

/// A scalar text dataset.
pub(super) fn read_text(dataset: &Dataset) -> Result<String, TrialError> {
    let object = dataset.name();
    expect_type(dataset, TypeDescriptor::VarLenUnicode, &object, "a variable-length UTF-8 string")?;
    let text: VarLenUnicode = dataset.read_scalar().doing("reading", object)?;
    Ok(loaded_text(&text))
}

/// A scalar number dataset.
pub(super) fn read_number<T: H5Type>(dataset: &Dataset) -> Result<T, TrialError> {
    let object = dataset.name();
    expect_type(dataset, T::type_descriptor(), &object, "a number of the documented width")?;
    dataset.read_scalar().doing("reading", object)
}

pub(super) fn expect_type(
    at: &hdf5::Container,
    expected: TypeDescriptor,
    object: &str,
    in_words: &'static str,
) -> Result<(), TrialError> {
    let found = at.dtype().and_then(|dtype| dtype.to_descriptor()).doing("reading the type of", object)?;
    if found == expected {
        return Ok(());
    }
    Err(TrialError::WrongType { object: object.to_owned(), found: found.to_string(), expected: in_words })
}

pub(super) fn full_name(at: &Location, name: &str) -> String {
    let parent = at.name();
    if parent == "/" { format!("/{name}") } else { format!("{parent}/{name}") }
}
