/** Kept with every result; raise it whenever a change could move a digit of an answer. */
export const ENGINE_VERSION = 'heddle-stats 2.0.0';
