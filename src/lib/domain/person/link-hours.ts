/** How long a link works, in hours. */
export const linkHours = { invitation: 7 * 24, reset: 1, 'set-up': 24 } as const;
