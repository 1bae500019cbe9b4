//! Phase tracker, alarms, what a release now would give. Pure: time comes with the data.
