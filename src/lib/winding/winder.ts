/**
 * The whole fold of one winder: lines, taps, coils and the passing of time go in, the state and its facts come out. No
 * clock, no input or output: every time is an argument. The state is plain data and is never changed in place, so it can
 * be stored as JSON and compared.
 *
 * This is its public face; the parts stand beside it:
 * boot.ts (one boot), run.ts (one run), state.ts (both together), lines.ts → totals.ts, sensor.ts, follow.ts → looks.ts,
 * taps.ts → acts.ts, coils.ts, time.ts, commands.ts, view.ts, cursor.ts.
 */
export { newWinder, type TapAnswer, type WinderState } from './state.ts';
export { takeLine, type KeptLine, type LineStep } from './lines.ts';
export { takeTap } from './taps.ts';
export { undoMs } from './acts.ts';
export { askWhichWinder, changePlan, dropWaiting, firstLookTurns, takeCoil, wantsCoil } from './coils.ts';
export { passTime } from './time.ts';
export { ackOf, commands } from './commands.ts';
export { figuresOf, idleTurns, runIdsOf, viewOf, type WinderView } from './view.ts';
export { mergeCursor, type Cursor } from './cursor.ts';
