import { sql, type Kysely } from 'kysely';

/**
 * Workshops, their people and winders, lines, runs and the queue.
 *
 * Every table holds `workshop_id`; row-level security compares it with the setting `turnstead.workshop`, which the
 * application sets for each transaction. After a commit PostgreSQL leaves '' in a setting made with is_local, hence nullif.
 * Foreign keys bypass the policies, so they always carry the workshop. What must be found before the workshop is known
 * (sign-in, link key, password link) goes through narrow SECURITY DEFINER functions and through nothing else.
 */
export async function up(db: Kysely<never>): Promise<void> {
	const run = (text: string) => sql.raw(text).execute(db);

	// The role the application works as: owns nothing, bypasses nothing. Roles belong to the cluster, so another
	// database of it may have made this one already, even at this moment.
	await run(`
		do $$ begin
			if not exists (select 1 from pg_roles where rolname = 'turnstead_app') then
				create role turnstead_app nologin;
			end if;
		exception when duplicate_object or unique_violation then null;
		end $$`);
	// From PostgreSQL 16 on, who makes a role is a member of it without the right to SET ROLE to it.
	await run(`
		do $$ begin
			if not pg_has_role(current_user, 'turnstead_app',
				case when current_setting('server_version_num')::int >= 160000 then 'set' else 'member' end) then
				execute format('grant turnstead_app to %I', current_user);
			end if;
		exception when unique_violation then null;
		end $$`);

	await run(`
		create function current_workshop() returns uuid language sql stable as
		$$ select nullif(current_setting('turnstead.workshop', true), '')::uuid $$`);

	await run(`
		create table workshop (
			id uuid primary key default gen_random_uuid(),
			short_name text not null unique check (short_name ~ '^[a-z][a-z0-9-]{0,30}$'),
			name text not null check (char_length(name) between 1 and 80),
			time_zone text not null,
			created_at timestamptz not null default now()
		)`);

	await run(`
		create table member (
			workshop_id uuid not null references workshop (id),
			id uuid not null default gen_random_uuid(),
			email text not null check (email = lower(email) and char_length(email) <= 254),
			name text not null check (char_length(name) between 1 and 80),
			role text not null check (role in ('owner', 'maker', 'apprentice')),
			password_hash text,
			session_epoch integer not null default 0,
			created_at timestamptz not null default now(),
			removed_at timestamptz,
			primary key (workshop_id, id)
		)`);
	// One account belongs to one workshop; who was removed from one may join another.
	await run(`create unique index member_email on member (email) where removed_at is null`);

	await run(`
		create table password_link (
			workshop_id uuid not null,
			id uuid not null default gen_random_uuid(),
			member_id uuid not null,
			token_hash bytea not null unique,
			created_at timestamptz not null default now(),
			expires_at timestamptz not null,
			used_at timestamptz,
			primary key (workshop_id, id),
			foreign key (workshop_id, member_id) references member (workshop_id, id)
		)`);

	await run(`
		create table winder (
			workshop_id uuid not null references workshop (id),
			id uuid not null default gen_random_uuid(),
			name text not null check (char_length(name) between 1 and 16),
			pulses_per_turn integer not null default 1 check (pulses_per_turn between 1 and 1000),
			rpm_max integer not null default 2000 check (rpm_max between 10 and 20000),
			sees_direction boolean not null default false,
			forward_is text not null default 'counter-clockwise' check (forward_is in ('counter-clockwise', 'clockwise')),
			ease_early_turns integer not null default 40 check (ease_early_turns between 0 and 2000),
			stop_early_turns integer not null default 3 check (stop_early_turns between 0 and 500),
			keep_after_s integer check (keep_after_s between 5 and 600),
			time_scale double precision not null default 1 check (time_scale between 1 and 1000),
			link_key_hash bytea unique,
			link_key_made_at timestamptz,
			created_at timestamptz not null default now(),
			removed_at timestamptz,
			primary key (workshop_id, id)
		)`);
	await run(`create unique index winder_name on winder (workshop_id, name) where removed_at is null`);

	// The queue: what to wind. `place` orders what waits.
	await run(`
		create table coil (
			workshop_id uuid not null references workshop (id),
			id uuid not null default gen_random_uuid(),
			name text not null check (char_length(name) between 1 and 80),
			note text not null default '' check (char_length(note) <= 500),
			target integer not null check (target between 1 and 100000),
			look_every integer not null check (look_every between 0 and 100000),
			direction text not null check (direction in ('counter-clockwise', 'clockwise')),
			top_faces text not null default 'out' check (top_faces in ('out', 'in')),
			tolerance_turns integer not null default 5 check (tolerance_turns between 0 and 1000),
			place double precision not null,
			state text not null default 'waiting' check (state in ('waiting', 'on-bench', 'wound', 'removed')),
			winder_id uuid,
			again_of_run uuid,
			created_by uuid,
			created_at timestamptz not null default now(),
			primary key (workshop_id, id),
			foreign key (workshop_id, winder_id) references winder (workshop_id, id),
			foreign key (workshop_id, created_by) references member (workshop_id, id)
		)`);
	await run(`create index coil_waiting on coil (workshop_id, place) where state = 'waiting'`);

	// One attempt at winding one coil. Figures stand here once the run is kept or set aside.
	await run(`
		create table run (
			workshop_id uuid not null,
			id uuid not null default gen_random_uuid(),
			coil_id uuid not null,
			winder_id uuid not null,
			coil_name text not null,
			target integer not null,
			look_every integer not null,
			direction text not null,
			top_faces text not null,
			tolerance_turns integer not null,
			state text not null default 'open' check (state in ('open', 'kept', 'set-aside')),
			set_aside_reason text,
			taken_at timestamptz not null,
			started_at timestamptz,
			ended_at timestamptz,
			ended_by uuid,
			sticker text,
			turns integer,
			on_bobbin integer,
			winding_ms bigint,
			stopped_ms bigint,
			rpm_mean real,
			rpm_top real,
			taken_back integer,
			looks jsonb,
			snaps jsonb,
			faults jsonb,
			note text not null default '' check (char_length(note) <= 2000),
			primary key (workshop_id, id),
			foreign key (workshop_id, coil_id) references coil (workshop_id, id),
			foreign key (workshop_id, winder_id) references winder (workshop_id, id),
			foreign key (workshop_id, ended_by) references member (workshop_id, id)
		)`);
	await run(`create unique index run_sticker on run (workshop_id, sticker)`);
	await run(`create index run_ended on run (workshop_id, ended_at desc, id) where state <> 'open'`);
	await run(`create index run_coil on run (workshop_id, coil_id)`);
	await run(`
		alter table coil add foreign key (workshop_id, again_of_run) references run (workshop_id, id)`);

	// The compact trace of a closed run: parallel arrays, device-relative milliseconds since the start, turns, rpm.
	await run(`
		create table run_trace (
			workshop_id uuid not null,
			run_id uuid not null,
			at_ms bigint[] not null,
			turns integer[] not null,
			rpm integer[] not null,
			primary key (workshop_id, run_id),
			foreign key (workshop_id, run_id) references run (workshop_id, id)
		)`);

	// The cursor of each boot; commits with every batch of its lines.
	await run(`
		create table boot (
			workshop_id uuid not null,
			winder_id uuid not null,
			boot text not null check (boot ~ '^[0-9A-F]{8}$'),
			n bigint not null,
			e bigint not null,
			forward bigint not null,
			reverse bigint not null,
			t bigint not null,
			first_at timestamptz not null,
			last_at timestamptz not null,
			primary key (workshop_id, winder_id, boot),
			foreign key (workshop_id, winder_id) references winder (workshop_id, id)
		)`);

	// Lines as they are kept: every event, ticks thinned. `t` is unwrapped device milliseconds.
	await run(`
		create table kept_line (
			workshop_id uuid not null,
			winder_id uuid not null,
			boot text not null,
			n bigint not null,
			e bigint not null,
			k text,
			f bigint not null,
			v bigint not null,
			r integer,
			t bigint not null,
			x bigint,
			g bigint,
			received_at timestamptz not null,
			primary key (workshop_id, winder_id, boot, n),
			foreign key (workshop_id, winder_id) references winder (workshop_id, id)
		)`);
	await run(`create index kept_line_received on kept_line (workshop_id, winder_id, received_at)`);
	await run(`create unique index kept_line_event on kept_line (workshop_id, winder_id, boot, e) where k is not null`);

	// The state of the fold, so that a server that was killed goes on where the last commit left it.
	await run(`
		create table winder_state (
			workshop_id uuid not null,
			winder_id uuid not null,
			state jsonb not null,
			fact_no bigint not null,
			saved_at timestamptz not null,
			primary key (workshop_id, winder_id),
			foreign key (workshop_id, winder_id) references winder (workshop_id, id)
		)`);

	// What must not be missed, numbered per winder by the one recorder.
	await run(`
		create table fact (
			workshop_id uuid not null,
			winder_id uuid not null,
			no bigint not null,
			run_id uuid,
			kind text not null,
			at timestamptz not null,
			turns integer,
			detail jsonb not null default '{}',
			member_id uuid,
			tap_id uuid,
			primary key (workshop_id, winder_id, no),
			foreign key (workshop_id, winder_id) references winder (workshop_id, id),
			foreign key (workshop_id, run_id) references run (workshop_id, id),
			foreign key (workshop_id, member_id) references member (workshop_id, id)
		)`);
	await run(`create index fact_run on fact (workshop_id, run_id, no)`);

	for (const table of [
		'member',
		'password_link',
		'winder',
		'coil',
		'run',
		'run_trace',
		'boot',
		'kept_line',
		'winder_state',
		'fact'
	]) {
		await run(`alter table ${table} enable row level security`);
		await run(`
			create policy own_workshop on ${table}
			using (workshop_id = current_workshop()) with check (workshop_id = current_workshop())`);
		await run(`grant select, insert, update, delete on ${table} to turnstead_app`);
	}
	await run(`alter table workshop enable row level security`);
	await run(
		`create policy own_workshop on workshop using (id = current_workshop()) with check (id = current_workshop())`
	);
	await run(`grant select, update on workshop to turnstead_app`);

	// Found before the workshop is known; each answers one question about one secret or one address.
	const finders = [
		`find_sign_in(address text)
			returns table (workshop_id uuid, member_id uuid, name text, role text, password_hash text, session_epoch integer)`,
		`find_link_key(key_hash bytea) returns table (workshop_id uuid, winder_id uuid)`,
		`find_password_link(hash bytea) returns table (workshop_id uuid, member_id uuid, link_id uuid)`
	];
	const bodies = [
		`select m.workshop_id, m.id, m.name, m.role, m.password_hash, m.session_epoch
			from member m where m.email = lower(address) and m.removed_at is null`,
		`select w.workshop_id, w.id from winder w where w.link_key_hash = key_hash and w.removed_at is null`,
		`select p.workshop_id, p.member_id, p.id from password_link p
			join member m on m.workshop_id = p.workshop_id and m.id = p.member_id
			where p.token_hash = hash and p.used_at is null and p.expires_at > now() and m.removed_at is null`
	];
	for (const [i, head] of finders.entries()) {
		await run(`
			create function ${head} language sql stable security definer set search_path = public, pg_temp as
			$$ ${bodies[i]} $$`);
		const name = head.slice(0, head.indexOf('('));
		await run(`revoke all on function ${name} from public`);
		await run(`grant execute on function ${name} to turnstead_app`);
	}
	await run(`grant execute on function current_workshop() to turnstead_app`);
	await run(`grant usage on schema public to turnstead_app`);
}
