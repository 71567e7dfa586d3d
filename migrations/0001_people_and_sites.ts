import type { Knex } from 'knex'

/** Sites, people, what they may do, their sign-ins, and the trail of who did what. */
export async function up(knex: Knex): Promise<void> {
  await knex.raw(`
    create extension if not exists btree_gist;

    create table sites (
      id integer generated always as identity primary key,
      slug text not null unique check (slug ~ '^[a-z0-9]+(-[a-z0-9]+)*$'),
      name text not null,
      time_zone text not null,
      elevation_m double precision not null default 0,
      -- Each site has a clock: real time at rate 1, or (for the bench) an anchor and a rate of its own.
      clock_rate double precision not null default 1 check (clock_rate > 0),
      clock_real_anchor timestamptz,
      clock_site_anchor timestamptz,
      check ((clock_real_anchor is null) = (clock_site_anchor is null)),
      check (clock_rate = 1 or clock_real_anchor is not null)
    );

    create table users (
      id integer generated always as identity primary key,
      email text not null,
      name text not null,
      password_hash text not null,
      units text not null default 'us' check (units in ('us', 'si')),
      theme text not null default 'system' check (theme in ('night', 'paper', 'system')),
      locale text not null default 'en' check (locale in ('en', 'es')),
      disabled_at timestamptz,
      created_at timestamptz not null
    );
    create unique index users_email on users (lower(email));

    create table site_roles (
      user_id integer not null references users on delete cascade,
      site_id integer not null references sites on delete cascade,
      role text not null check (role in ('crew', 'lead', 'prep', 'manager', 'engineer', 'owner', 'display')),
      primary key (user_id, site_id, role)
    );

    -- A family is one sign-in on one device; each token of it is used once and replaced by the next.
    create table refresh_tokens (
      token_hash bytea primary key,
      family_id uuid not null,
      user_id integer not null references users on delete cascade,
      created_at timestamptz not null,
      expires_at timestamptz not null,
      used_at timestamptz,
      revoked_at timestamptz
    );
    create index refresh_tokens_family on refresh_tokens (family_id);
    create index refresh_tokens_expired on refresh_tokens (expires_at);

    create table audit_entries (
      id bigint generated always as identity primary key,
      at timestamptz not null,
      user_id integer references users,
      site_id integer references sites,
      action text not null,
      subject text not null,
      data jsonb not null default '{}'
    );
    create index audit_entries_site on audit_entries (site_id, at desc);
  `)
}

export async function down(knex: Knex): Promise<void> {
  await knex.raw('drop table audit_entries, refresh_tokens, site_roles, users, sites')
}
