import { expect, it } from 'vitest';
import { wayBack } from './way-back.ts';

it.each([
	['/book?page=2', '/book?page=2'],
	[null, '/'],
	['', '/'],
	['book', '/'],
	['https://else.where/', '/'],
	['//else.where/', '/'],
	['/\\else.where', '/'],
	['/\t/else.where', '/'],
	['/.//else.where', '/'],
	['javascript:alert(1)', '/'],
	['/sign-in?to=%2Fsign-in', '/']
])('after signing in %s leads to %s', (to, path) => expect(wayBack(to)).toBe(path));
