//! A group opened for reading: its members are listed first, and whatever is no hard link is refused, so that nothing in
//! a file can lead out of it.

use std::collections::BTreeMap;

use hdf5::{Dataset, Group, IndexType, IterationOrder, LinkType};

use super::attribute::full_name;
use super::column::{Cell, OpenColumn};
use super::error::{Doing, TrialError};

/// More members than any group of a trial has.
const MEMBERS_MAX: usize = 100_000;

pub(super) struct Members {
    group: Group,
    links: BTreeMap<String, LinkType>,
}

impl Members {
    pub(super) fn of(group: Group) -> Result<Self, TrialError> {
        let mut links = BTreeMap::new();
        let listed = group.iter_visit(IndexType::Name, IterationOrder::Native, |name, info| {
            if links.len() < MEMBERS_MAX {
                links.insert(name.to_owned(), info.link_type);
            }
            Ok(())
        });
        listed.doing("listing", group.name())?;
        Ok(Self { group, links })
    }

    pub(super) fn group(&self) -> &Group {
        &self.group
    }

    pub(super) fn names(&self) -> impl Iterator<Item = &str> {
        self.links.keys().map(String::as_str)
    }

    fn object(&self, name: &str) -> Result<String, TrialError> {
        let object = full_name(&self.group, name);
        match self.links.get(name) {
            Some(LinkType::Hard) => Ok(object),
            Some(_) => Err(TrialError::Foreign { object, what: "a link that is no hard link" }),
            None => Err(TrialError::Missing { object }),
        }
    }

    pub(super) fn child(&self, name: &str) -> Result<Self, TrialError> {
        let object = self.object(name)?;
        Self::of(self.group.group(name).doing("opening group", object)?)
    }

    pub(super) fn dataset(&self, name: &str) -> Result<Dataset, TrialError> {
        let object = self.object(name)?;
        self.group.dataset(name).doing("opening dataset", object)
    }

    pub(super) fn column<T: Cell>(&self, name: &str) -> Result<OpenColumn<T>, TrialError> {
        OpenColumn::new(self.dataset(name)?)
    }

    /// Refuses columns that are not all as long as the first.
    pub(super) fn expect_even(&self, lengths: &[(usize, &str)]) -> Result<(), TrialError> {
        let expected = lengths.first().map_or(0, |(length, _)| *length);
        match lengths.iter().find(|(length, _)| *length != expected) {
            None => Ok(()),
            Some((found, name)) => {
                Err(TrialError::Uneven { object: full_name(&self.group, name), found: *found, expected })
            }
        }
    }
}
