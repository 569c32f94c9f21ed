//! Tests of the core on a table whose every value is known in closed form.

mod arm;
mod choice;
mod damage;
mod format;
mod lookup;
mod meaning;
mod pose;
mod seed;
mod tolerance;
mod words;
