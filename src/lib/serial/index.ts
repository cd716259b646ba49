/** Serial ports, for programs that run on Node: the server and the bridge. */
export * from './line-port.ts';
export { whoHolds, type Holder } from './holders.ts';
export { boardOf, usbPorts, type Board, type TtyPlaces } from './tty.ts';
