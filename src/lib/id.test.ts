import { afterEach, describe, expect, it } from 'vitest';
import { clock } from './time/clock';
import { ids, isId, newId, newRandomId, newToken, tokens } from './id';

afterEach(() => {
	ids.reset();
	tokens.reset();
	clock.reset();
});

describe('ids', () => {
	it('are UUIDs of version 7 that carry the time (RFC 9562 §5.7)', () => {
		// RFC 9562 appendix A.6: 2022-02-22T14:22:22-05:00 is 0x017F22E279B0 milliseconds.
		clock.set('2022-02-22T14:22:22.000-05:00');
		const id = newId();
		expect(id.startsWith('017f22e2-79b0-7')).toBe(true);
		expect(isId(id)).toBe(true);
	});

	it('keep their order and differ within one millisecond and past its counter', () => {
		clock.set('2026-01-15T10:00:00Z');
		const made = Array.from({ length: 10_000 }, newId);
		expect([...made].sort()).toEqual(made);
		expect(new Set(made).size).toBe(made.length);
	});

	it('repeat from a seed and do not without one', () => {
		clock.set('2026-01-15T10:00:00Z');
		const run = () => {
			ids.seed(7);
			return [newId(), newId(), newRandomId()];
		};
		expect(run()).toEqual(run());
		ids.reset();
		expect(newId()).not.toBe(newId());
		ids.seed(8);
		const other = newId();
		ids.seed(7);
		expect(newId()).not.toBe(other);
	});

	it('come wholly random as version 4', () => {
		expect(newRandomId()).toMatch(/^[0-9a-f]{8}-[0-9a-f]{4}-4/);
		expect(isId(newRandomId())).toBe(true);
	});

	it('are told from other text', () => {
		for (const text of ['', 'x', newId().toUpperCase(), `${newId()} `, `${newId()}\n`, 7, null])
			expect(isId(text)).toBe(false);
	});
});

describe('tokens', () => {
	it('hold the asked number of bytes as base64url', () => {
		expect(newToken()).toMatch(/^[A-Za-z0-9_-]{43}$/);
		expect(newToken(16)).toMatch(/^[A-Za-z0-9_-]{22}$/);
		expect(() => newToken(8)).toThrow(RangeError);
	});

	it('are not moved by the seed of the ids', () => {
		ids.seed(1);
		const first = newToken();
		ids.seed(1);
		expect(newToken()).not.toBe(first);
	});

	it('can be seeded inside the test runner', () => {
		tokens.seedForTests(1);
		const first = newToken();
		tokens.seedForTests(1);
		expect(newToken()).toBe(first);
	});
});
