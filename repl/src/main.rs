//! The program: prompt and subcommands.

mod render;

fn main() {}
