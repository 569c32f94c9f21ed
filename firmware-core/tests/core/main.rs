//! Tests of the core on a table whose every value is known in closed form.

mod arm;
mod choice;
mod crossings;
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
mod supervisor;
mod supervisor_random;
mod tolerance;
mod words;
