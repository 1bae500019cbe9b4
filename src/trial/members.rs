//! A group opened for reading: its members are listed first, and whatever is no hard link is refused, so that nothing in
//! a file can lead out of it.

use std::collections::BTreeMap;

use hdf5::{Dataset, Group, IndexType, IterationOrder, LinkType};

use super::attribute::full_name;
use super::column::{Cell, OpenColumn};
use super::error::{Doing, TrialError};

/// More members than any group of a trial has: a device that describes itself every second takes 11 days to get there.
/// A group with more is refused whole; part of it would read as if the rest were missing.
const MEMBERS_MAX: usize = 1_000_000;

pub(super) struct Members {
    group: Group,
    links: BTreeMap<String, LinkType>,
}

impl Members {
    pub(super) fn of(group: Group) -> Result<Self, TrialError> {
        Self::of_at_most(group, MEMBERS_MAX)
    }

    fn of_at_most(group: Group, n_max: usize) -> Result<Self, TrialError> {
        let mut links = BTreeMap::new();
        let mut n_found = 0_usize;
        let listed = group.iter_visit(IndexType::Name, IterationOrder::Native, |name, info| {
            n_found += 1;
            if n_found <= n_max {
                links.insert(name.to_owned(), info.link_type);
            }
            Ok(())
        });
        listed.doing("listing", group.name())?;
        if n_found > n_max {
            return Err(TrialError::TooMany { object: group.name(), n_found, n_max });
        }
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

#[cfg(test)]
mod tests {
    use super::*;

    #[test]
    fn a_group_with_too_many_members_is_refused_and_not_read_in_part() {
        let dir = tempfile::tempdir().unwrap();
        let file = hdf5::File::create(dir.path().join("many.h5")).unwrap();
        (0..5).for_each(|k| drop(file.create_group(&format!("g{k}")).unwrap()));
        let root = || file.group("/").unwrap();
        assert_eq!(Members::of_at_most(root(), 5).unwrap().names().count(), 5);
        let refused = Members::of_at_most(root(), 4).map(|members| members.names().count());
        assert!(matches!(refused, Err(TrialError::TooMany { n_found: 5, n_max: 4, .. })), "{refused:?}");
    }
}
