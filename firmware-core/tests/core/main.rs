//! Tests of the core on a table whose every value is known in closed form.

mod arm;
mod choice;
mod damage;
mod format;
mod load;
mod lookup;
mod meaning;
mod parameter;
mod payloads;
mod pose;
mod reserves;
mod seed;
mod tolerance;
mod words;
