//! Elements, levels, lines and partition functions: the built-in catalogue and readers of line lists.
