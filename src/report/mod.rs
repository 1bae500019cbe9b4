//! Pages for people: HTML with SVG plots.
