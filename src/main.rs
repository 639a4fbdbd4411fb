//! `shotwright` on the command line: parse, run, map to an exit code.

fn main() {}
