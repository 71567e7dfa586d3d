import type { Knex } from 'knex'

/** Cookers, the boxes that report, their channels, and which sensor hung on which channel when. */
export async function up(knex: Knex): Promise<void> {
  await knex.raw(`
    create table cookers (
      id integer generated always as identity primary key,
      version integer not null default 1,
      site_id integer not null references sites,
      name text not null,
      kind text not null check (kind in ('offset', 'cabinet', 'rotisserie', 'kettle', 'holding')),
      capacity integer not null check (capacity > 0),
      position integer not null,
      pit_set_c double precision not null,
      band_low_c double precision not null,
      band_high_c double precision not null,
      retired_at timestamptz,
      check (band_low_c < band_high_c),
      unique (site_id, name)
    );

    create table devices (
      id integer generated always as identity primary key,
      site_id integer not null references sites,
      slug text not null check (slug ~ '^[a-z0-9]+(-[a-z0-9]+)*$'),
      name text not null,
      username text not null unique,
      interval_s double precision not null default 5 check (interval_s > 0),
      connection text not null default 'never' check (connection in ('never', 'online', 'offline')),
      last_seen_at timestamptz,
      battery_percent double precision,
      signal_dbm double precision,
      created_at timestamptz not null,
      unique (site_id, slug)
    );

    -- More than one row while a secret is being changed: the old one holds until it expires.
    create table device_secrets (
      id integer generated always as identity primary key,
      device_id integer not null references devices on delete cascade,
      secret_hash bytea not null,
      created_at timestamptz not null,
      expires_at timestamptz
    );
    create index device_secrets_device on device_secrets (device_id);

    create table channels (
      id integer generated always as identity primary key,
      device_id integer not null references devices,
      number integer not null check (number > 0),
      unique (device_id, number)
    );

    create table sensors (
      id integer generated always as identity primary key,
      channel_id integer not null references channels,
      kind text not null check (kind in ('digital', 'thermistor', 'pt100', 'thermocouple_k')),
      -- Added to what the sensor's curve gives.
      offset_c double precision not null default 0,
      -- Steinhart–Hart coefficients of a thermistor.
      coefficient_a double precision,
      coefficient_b double precision,
      coefficient_c double precision,
      during tstzrange not null,
      check (kind <> 'thermistor' or num_nonnulls(coefficient_a, coefficient_b, coefficient_c) = 3),
      check (lower_inc(during) and not upper_inc(during) and not isempty(during)),
      exclude using gist (channel_id with =, during with &&)
    );
  `)
}

export async function down(knex: Knex): Promise<void> {
  await knex.raw('drop table sensors, channels, device_secrets, devices, cookers')
}
