/** Something the person at the command line can put right: its message is the one sentence shown. */
export class BadInput extends Error {}
