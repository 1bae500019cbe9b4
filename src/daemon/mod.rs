//! Joins link, journal, live, feed and archive into one process that loses nothing.
