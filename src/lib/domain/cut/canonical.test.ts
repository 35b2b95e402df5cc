import { describe, expect, it } from 'vitest';
import fc from 'fast-check';
import { canonical, fingerprint, shortFingerprint, type Json } from './canonical';
import { fingerprintNow, fingerprintOf } from './fingerprint.server';

describe('canonical JSON', () => {
	it('RFC 8785 §3.2.2: numbers, strings and literals', () => {
		const input = String.raw`{
			"numbers": [333333333.33333329, 1E30, 4.50, 2e-3, 0.000000000000000000000000001],
			"string": "\u20ac$\u000F\u000aA'\u0042\u0022\u005c\\\"\/",
			"literals": [null, true, false]
		}`;
		expect(canonical(JSON.parse(input))).toBe(
			String.raw`{"literals":[null,true,false],"numbers":[333333333.3333333,1e+30,4.5,0.002,1e-27],"string":"€$\u000f\nA'B\"\\\\\"/"}`
		);
	});

	it('RFC 8785 §3.2.3: keys are sorted by UTF-16 code units', () => {
		const sorted = canonical({
			'\u20ac': 'Euro Sign',
			'\r': 'Carriage Return',
			'\ufb33': 'Hebrew Letter Dalet With Dagesh',
			'1': 'One',
			'\ud83d\ude00': 'Emoji: Grinning Face',
			'\u0080': 'Control',
			'\u00f6': 'Latin Small Letter O With Diaeresis'
		});
		expect([...sorted.matchAll(/:"([^"]*)"/g)].map((match) => match[1])).toEqual([
			'Carriage Return',
			'One',
			'Control',
			'Latin Small Letter O With Diaeresis',
			'Euro Sign',
			'Emoji: Grinning Face',
			'Hebrew Letter Dalet With Dagesh'
		]);
	});

	// RFC 8785 appendix B: IEEE 754 bits and the text of the number.
	it.each([
		['0000000000000000', '0'],
		['8000000000000000', '0'],
		['0000000000000001', '5e-324'],
		['8000000000000001', '-5e-324'],
		['7fefffffffffffff', '1.7976931348623157e+308'],
		['ffefffffffffffff', '-1.7976931348623157e+308'],
		['4340000000000000', '9007199254740992'],
		['c340000000000000', '-9007199254740992'],
		['4430000000000000', '295147905179352830000'],
		['44b52d02c7e14af5', '9.999999999999997e+22'],
		['44b52d02c7e14af6', '1e+23'],
		['44b52d02c7e14af7', '1.0000000000000001e+23'],
		['444b1ae4d6e2ef4e', '999999999999999700000'],
		['444b1ae4d6e2ef4f', '999999999999999900000'],
		['444b1ae4d6e2ef50', '1e+21'],
		['3eb0c6f7a0b5ed8c', '9.999999999999997e-7'],
		['3eb0c6f7a0b5ed8d', '0.000001'],
		['41b3de4355555553', '333333333.3333332'],
		['41b3de4355555554', '333333333.33333325'],
		['41b3de4355555555', '333333333.3333333'],
		['41b3de4355555556', '333333333.3333334'],
		['41b3de4355555557', '333333333.33333343'],
		['becbf647612f3696', '-0.0000033333333333333333'],
		['43143ff3c1cb0959', '1424953923781206.2']
	])('RFC 8785 appendix B: %s is %s', (bits, text) => {
		expect(canonical(Buffer.from(bits, 'hex').readDoubleBE())).toBe(text);
	});

	it('refuses what JSON does not hold', () => {
		const cases: unknown[] = [
			NaN,
			Infinity,
			undefined,
			1n,
			new Date(0),
			new Map(),
			'\ud800',
			{ a: undefined }
		];
		for (const value of cases) expect(() => canonical(value as Json)).toThrow(TypeError);
	});

	it('is read back as the same content, and does not depend on the order keys were set', () => {
		fc.assert(
			fc.property(fc.jsonValue(), (value) => {
				const text = canonical(value as Json);
				expect(JSON.parse(text)).toEqual(JSON.parse(JSON.stringify(value)));
				expect(canonical(JSON.parse(text))).toBe(text);
			})
		);
		expect(canonical({ b: 1, a: 2 })).toBe(canonical({ a: 2, b: 1 }));
	});
});

describe('fingerprint', () => {
	// FIPS 180-4 examples (NIST, SHA-256): "abc" and the 448-bit message.
	it.each([
		['abc', 'ba7816bf8f01cfea414140de5dae2223b00361a396177a9cb410ff61f20015ad'],
		[
			'abcdbcdecdefdefgefghfghighijhijkijkljklmklmnlmnomnopnopq',
			'248d6a61d20638b8e5c026930c3e6039a33ce45964ff2167f6ecedd419db06c1'
		]
	])('of %s, by both ways', async (text, hash) => {
		expect(await fingerprint(text)).toBe(hash);
		expect(fingerprintNow(text)).toBe(hash);
		expect(fingerprintOf([text.slice(0, 1), text.slice(1)])).toBe(hash);
	});

	it('is shortened for the eye', () => {
		expect(shortFingerprint('ba7816bf8f01cfea414140de5dae2223')).toBe('ba78 16bf 8f01 cfea');
	});
});
