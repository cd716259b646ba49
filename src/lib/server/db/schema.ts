import type { ColumnType, Generated, JSONColumnType, Kysely } from 'kysely';
import type { MeterRange } from '../../coil/measurement.ts';
import type { UnitPreference } from '../../coil/units.ts';
import type { SpecContent, SpecWire } from '../../spec/content.ts';
import type { Direction, Look, Snap, TopFaces } from '../../winding/types.ts';

/** The tables as migrations/ leave them. bigint columns are read as numbers (all stay below 2^53); see connect.ts. */

type When = ColumnType<Date, Date | string, Date | string>;
type WhenMade = ColumnType<Date, Date | string | undefined, never>;
type Big = ColumnType<number, number, number>;

export interface WorkshopTable {
	id: Generated<string>;
	short_name: string;
	name: string;
	time_zone: string;
	created_at: WhenMade;
}

export type Role = 'owner' | 'maker' | 'apprentice';

export interface MemberTable {
	workshop_id: string;
	id: Generated<string>;
	email: string;
	name: string;
	role: Role;
	password_hash: string | null;
	session_epoch: Generated<number>;
	/** null: the usual units. */
	units: JSONColumnType<UnitPreference> | null;
	created_at: WhenMade;
	removed_at: When | null;
}

export interface PasswordLinkTable {
	workshop_id: string;
	id: Generated<string>;
	member_id: string;
	token_hash: Buffer;
	created_at: WhenMade;
	expires_at: When;
	used_at: When | null;
}

export interface WinderTable {
	workshop_id: string;
	id: Generated<string>;
	name: string;
	pulses_per_turn: Generated<number>;
	rpm_max: Generated<number>;
	sees_direction: Generated<boolean>;
	forward_is: Generated<Direction>;
	ease_early_turns: Generated<number>;
	stop_early_turns: Generated<number>;
	keep_after_s: number | null;
	time_scale: Generated<number>;
	link_key_hash: Buffer | null;
	link_key_made_at: When | null;
	created_at: WhenMade;
	removed_at: When | null;
}

export interface CoilTable {
	workshop_id: string;
	id: Generated<string>;
	name: string;
	note: Generated<string>;
	target: number;
	look_every: number;
	direction: Direction;
	top_faces: Generated<TopFaces>;
	tolerance_turns: Generated<number>;
	place: number;
	state: Generated<'waiting' | 'on-bench' | 'wound' | 'removed'>;
	winder_id: string | null;
	again_of_run: string | null;
	created_by: string | null;
	created_at: WhenMade;
	/** Where it comes from: all three or none. */
	spec_id: string | null;
	spec_revision_no: number | null;
	spec_coil: number | null;
	spool_id: string | null;
	/** null: the usual one; 0: none. */
	first_look: number | null;
	/** Turns at which the wire reaches the flange; null: unknown. */
	full_turns: number | null;
}

export interface RunTable {
	workshop_id: string;
	id: Generated<string>;
	coil_id: string;
	winder_id: string;
	coil_name: string;
	target: number;
	look_every: number;
	direction: Direction;
	top_faces: TopFaces;
	tolerance_turns: number;
	state: Generated<'open' | 'kept' | 'set-aside'>;
	set_aside_reason: string | null;
	taken_at: When;
	started_at: When | null;
	ended_at: When | null;
	ended_by: string | null;
	sticker: string | null;
	turns: number | null;
	on_bobbin: number | null;
	winding_ms: Big | null;
	stopped_ms: Big | null;
	rpm_mean: number | null;
	rpm_top: number | null;
	taken_back: number | null;
	looks: JSONColumnType<Look[]> | null;
	snaps: JSONColumnType<Snap[]> | null;
	faults: JSONColumnType<string[]> | null;
	note: Generated<string>;
	/** Where it comes from: all three or none. */
	spec_id: string | null;
	spec_revision_no: number | null;
	spec_coil: number | null;
	spool_id: string | null;
	/** null: the usual one; 0: none. */
	first_look: number | null;
	/** Turns at which the wire reaches the flange; null: unknown. */
	full_turns: number | null;
}

export interface RunTraceTable {
	workshop_id: string;
	run_id: string;
	at_ms: number[];
	turns: number[];
	rpm: number[];
}

export interface BootTable {
	workshop_id: string;
	winder_id: string;
	boot: string;
	n: Big;
	e: Big;
	forward: Big;
	reverse: Big;
	t: Big;
	first_at: When;
	last_at: When;
}

export interface KeptLineTable {
	workshop_id: string;
	winder_id: string;
	boot: string;
	n: Big;
	e: Big;
	k: string | null;
	f: Big;
	v: Big;
	r: number | null;
	t: Big;
	x: Big | null;
	g: Big | null;
	received_at: When;
}

export interface WinderStateTable {
	workshop_id: string;
	winder_id: string;
	state: JSONColumnType<object>;
	fact_no: Big;
	saved_at: When;
}

export interface FactTable {
	workshop_id: string;
	winder_id: string;
	no: Big;
	run_id: string | null;
	kind: string;
	at: When;
	turns: number | null;
	detail: JSONColumnType<Record<string, string | number | boolean | null>>;
	member_id: string | null;
	tap_id: string | null;
}

export interface SpecTable {
	workshop_id: string;
	id: Generated<string>;
	created_by: string | null;
	created_at: WhenMade;
	put_away_at: When | null;
}

export interface SpecRevisionTable {
	workshop_id: string;
	spec_id: string;
	no: number;
	name: string;
	content: JSONColumnType<SpecContent>;
	why: Generated<string>;
	created_by: string | null;
	created_at: WhenMade;
	saved_at: ColumnType<Date, Date | string | undefined, Date | string>;
	used_at: When | null;
}

export interface SpoolTable {
	workshop_id: string;
	id: Generated<string>;
	name: string;
	lot: Generated<string>;
	wire: JSONColumnType<SpecWire>;
	note: Generated<string>;
	created_by: string | null;
	created_at: WhenMade;
	ended_at: When | null;
}

export interface MeterTable {
	workshop_id: string;
	id: Generated<string>;
	name: string;
	ranges: JSONColumnType<MeterRange[]>;
	created_at: WhenMade;
	removed_at: When | null;
}

export type ReadingKind = 'resistance' | 'inductance' | 'outer-width';
export type ReadingStage = 'wound' | 'leads' | 'tape' | 'assembled' | 'covered';

export interface ReadingTable {
	workshop_id: string;
	id: Generated<string>;
	run_id: string;
	kind: ReadingKind;
	stage: ReadingStage;
	/** Ω, H or m; null: beyond every range of the meter. */
	value: number | null;
	temperature_c: number | null;
	temperature_half_width_c: number | null;
	meter_id: string | null;
	meter_name: Generated<string>;
	meter_range: JSONColumnType<MeterRange> | null;
	half_width: number | null;
	note: Generated<string>;
	taken_at: ColumnType<Date, Date | string | undefined, Date | string>;
	taken_by: string | null;
	struck_at: When | null;
	struck_by: string | null;
}

export interface Database {
	workshop: WorkshopTable;
	member: MemberTable;
	password_link: PasswordLinkTable;
	winder: WinderTable;
	coil: CoilTable;
	run: RunTable;
	run_trace: RunTraceTable;
	boot: BootTable;
	kept_line: KeptLineTable;
	winder_state: WinderStateTable;
	fact: FactTable;
	spec: SpecTable;
	spec_revision: SpecRevisionTable;
	spool: SpoolTable;
	meter: MeterTable;
	reading: ReadingTable;
}

/** A handle on the database, for those who pass it on and never write a query themselves. */
export type Db = Kysely<Database>;
