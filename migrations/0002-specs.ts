import { sql, type Kysely } from 'kysely';

/**
 * Specs and their revisions, spools, meters, readings; what a coil and a run keep of the spec they come from, and the units
 * a person wants values shown in.
 *
 * A revision's content is one document, checked by the program's own schema on its way in and out: a frozen state is read
 * whole and compared whole. `used_at` freezes it: from then on saving makes the next revision.
 */
export async function up(db: Kysely<never>): Promise<void> {
	const run = (text: string) => sql.raw(text).execute(db);

	// null: the usual units.
	await run(`alter table member add column units jsonb`);

	await run(`
		create table spec (
			workshop_id uuid not null references workshop (id),
			id uuid not null default gen_random_uuid(),
			created_by uuid,
			created_at timestamptz not null default now(),
			put_away_at timestamptz,
			primary key (workshop_id, id),
			foreign key (workshop_id, created_by) references member (workshop_id, id)
		)`);

	await run(`
		create table spec_revision (
			workshop_id uuid not null,
			spec_id uuid not null,
			no integer not null check (no between 1 and 10000),
			name text not null check (char_length(name) between 1 and 80),
			content jsonb not null,
			why text not null default '' check (char_length(why) <= 500),
			created_by uuid,
			created_at timestamptz not null default now(),
			saved_at timestamptz not null default now(),
			used_at timestamptz,
			primary key (workshop_id, spec_id, no),
			foreign key (workshop_id, spec_id) references spec (workshop_id, id),
			foreign key (workshop_id, created_by) references member (workshop_id, id)
		)`);

	// One bought reel: what is on it, and what it was measured to have per metre, stands in \`wire\`.
	await run(`
		create table spool (
			workshop_id uuid not null references workshop (id),
			id uuid not null default gen_random_uuid(),
			name text not null check (char_length(name) between 1 and 80),
			lot text not null default '' check (char_length(lot) <= 80),
			wire jsonb not null,
			note text not null default '' check (char_length(note) <= 2000),
			created_by uuid,
			created_at timestamptz not null default now(),
			ended_at timestamptz,
			primary key (workshop_id, id),
			foreign key (workshop_id, created_by) references member (workshop_id, id)
		)`);
	await run(`create unique index spool_name on spool (workshop_id, lower(name)) where ended_at is null`);

	await run(`
		create table meter (
			workshop_id uuid not null references workshop (id),
			id uuid not null default gen_random_uuid(),
			name text not null check (char_length(name) between 1 and 80),
			ranges jsonb not null,
			created_at timestamptz not null default now(),
			removed_at timestamptz,
			primary key (workshop_id, id)
		)`);
	await run(`create unique index meter_name on meter (workshop_id, lower(name)) where removed_at is null`);

	for (const table of ['coil', 'run']) {
		// \`full_turns\`: where the wire reaches the flange. \`first_look\`: null is the workshop's usual one, 0 none.
		await run(`
			alter table ${table}
				add column spec_id uuid,
				add column spec_revision_no integer,
				add column spec_coil smallint check (spec_coil between 0 and 1),
				add column spool_id uuid,
				add column first_look integer check (first_look between 0 and 100000),
				add column full_turns integer check (full_turns between 1 and 1000000),
				add check (num_nulls(spec_id, spec_revision_no, spec_coil) in (0, 3)),
				add foreign key (workshop_id, spec_id, spec_revision_no)
					references spec_revision (workshop_id, spec_id, no),
				add foreign key (workshop_id, spool_id) references spool (workshop_id, id)`);
		await run(`create index ${table}_spec on ${table} (workshop_id, spec_id) where spec_id is not null`);
	}
	await run(`create index run_spool on run (workshop_id, spool_id) where spool_id is not null`);

	// A reading is never changed: a wrong one is struck out and stays to be seen. The meter's range is kept with it, so
	// that what the meter is said to be later does not change what was read. SI; value null: beyond every range.
	await run(`
		create table reading (
			workshop_id uuid not null,
			id uuid not null default gen_random_uuid(),
			run_id uuid not null,
			kind text not null check (kind in ('resistance', 'inductance', 'outer-width')),
			stage text not null check (stage in ('wound', 'leads', 'tape', 'assembled', 'covered')),
			value double precision check (value >= 0 and value < 'infinity'),
			temperature_c double precision check (temperature_c between -40 and 150),
			temperature_half_width_c double precision check (temperature_half_width_c between 0 and 50),
			meter_id uuid,
			meter_name text not null default '',
			meter_range jsonb,
			half_width double precision check (half_width >= 0 and half_width < 'infinity'),
			note text not null default '' check (char_length(note) <= 500),
			taken_at timestamptz not null default now(),
			taken_by uuid,
			struck_at timestamptz,
			struck_by uuid,
			primary key (workshop_id, id),
			check (kind <> 'resistance' or temperature_c is not null),
			check (kind = 'resistance' or value is not null),
			foreign key (workshop_id, run_id) references run (workshop_id, id),
			foreign key (workshop_id, meter_id) references meter (workshop_id, id),
			foreign key (workshop_id, taken_by) references member (workshop_id, id),
			foreign key (workshop_id, struck_by) references member (workshop_id, id)
		)`);
	await run(`create index reading_run on reading (workshop_id, run_id, taken_at)`);

	for (const table of ['spec', 'spec_revision', 'spool', 'meter', 'reading']) {
		await run(`alter table ${table} enable row level security`);
		await run(`
			create policy own_workshop on ${table}
			using (workshop_id = current_workshop()) with check (workshop_id = current_workshop())`);
		await run(`grant select, insert, update on ${table} to turnstead_app`);
	}
}
