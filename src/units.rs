//! Quantities as people write them ("900 N", "12 deg") and as the program keeps them: SI, the unit in the name.
