//! What a record must have in common with the program that reads it.

/// Format of the record's files. Raise it when a table or a column changes its meaning, or when
/// what the chain hashes changes. A file of another format is named and left alone.
pub const FORMAT_VERSION: i32 = 2;

/// Revision of the engine's arithmetic: raise it when the same inputs may lead to other outputs,
/// in one bit or more. A replay of a file that was written under another revision says so instead
/// of blaming the file, and a daemon finds the differences expected.
pub const ARITHMETIC_REVISION: i64 = 1;

/// Revision of the saved state: raise it when a type of the engine's state changes. States of
/// another revision are not read; the state is then built anew from the recorded inputs.
pub const STATE_REVISION: i64 = 2;
