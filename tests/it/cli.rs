//! The command line from outside: exit codes, folders, includes, standard input, formats.

mod bench;
mod includes;
mod lint;
mod other_commands;
mod walking;
