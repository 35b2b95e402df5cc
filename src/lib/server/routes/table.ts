import type { Capability } from '../permission';

export type Access = 'public' | 'signed-in' | Capability;
export type Method = 'GET' | 'POST' | 'PUT' | 'PATCH' | 'DELETE';
/** Route id (as the framework names it) and method to what is asked. */
export type RouteTable = Record<string, Partial<Record<Method, Access>>>;
