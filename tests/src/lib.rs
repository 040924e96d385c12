//! End-to-end tests of the `backlit` program: see the files beside `src`.
