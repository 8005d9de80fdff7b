//! The program: prompt and subcommands.

fn main() {}
