//! Options and help texts.
