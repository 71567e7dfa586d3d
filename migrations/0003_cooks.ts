import type { Knex } from 'knex'

/** Recipes, services, pieces, where they stood, which probe was in them, what happened, what was forecast. */
export async function up(knex: Knex): Promise<void> {
  await knex.raw(`
    create table recipes (
      id integer generated always as identity primary key,
      slug text not null unique,
      name text not null,
      cured boolean not null,
      pit_set_c double precision not null,
      wrap_at_c double precision not null,
      wrap_method text not null check (wrap_method in ('none', 'paper', 'foil', 'boat')),
      pull_at_c double precision not null,
      typical_kg double precision not null check (typical_kg > 0)
    );

    create table services (
      id integer generated always as identity primary key,
      site_id integer not null references sites,
      date date not null,
      serves_at timestamptz not null,
      portions integer not null check (portions >= 0),
      note text,
      unique (site_id, serves_at)
    );

    create table pieces (
      id integer generated always as identity primary key,
      version integer not null default 1,
      site_id integer not null references sites,
      label text not null check (length(label) between 1 and 24),
      parent_id integer references pieces,
      follows_id integer references pieces,
      service_id integer references services,
      recipe_id integer not null references recipes,
      cured boolean not null,
      raw_kg double precision not null check (raw_kg > 0),
      wrap_at_c double precision not null,
      wrap_method text not null check (wrap_method in ('none', 'paper', 'foil', 'boat')),
      pull_at_c double precision not null,
      created_at timestamptz not null,
      -- A projection of the piece's events, renewed in the transaction that adds one.
      stage text not null default 'waiting'
        check (stage in ('waiting', 'cooking', 'wrapped', 'pulled', 'resting', 'holding', 'done')),
      on_at timestamptz,
      wrapped_at timestamptz,
      wrapped_with text check (wrapped_with in ('paper', 'foil', 'boat')),
      pulled_at timestamptz,
      rest_at timestamptz,
      hold_at timestamptz,
      done_at timestamptz,
      trimmed_kg double precision,
      cooked_kg double precision,
      sliced_kg double precision,
      check (parent_id <> id and follows_id <> id)
    );
    create index pieces_open on pieces (site_id, id) where stage <> 'done';
    create index pieces_site on pieces (site_id, id desc);
    create index pieces_service on pieces (service_id);

    create table placements (
      id integer generated always as identity primary key,
      piece_id integer not null references pieces on delete cascade,
      cooker_id integer not null references cookers,
      position text,
      during tstzrange not null,
      check (lower_inc(during) and not upper_inc(during) and not isempty(during)),
      exclude using gist (piece_id with =, during with &&)
    );
    create index placements_cooker on placements using gist (cooker_id, during);

    create table probe_placements (
      id integer generated always as identity primary key,
      channel_id integer not null references channels,
      role text not null check (role in ('pit', 'meat')),
      piece_id integer references pieces on delete cascade,
      cooker_id integer references cookers,
      during tstzrange not null,
      check (case role when 'meat' then piece_id is not null and cooker_id is null
                       else cooker_id is not null and piece_id is null end),
      check (lower_inc(during) and not upper_inc(during) and not isempty(during)),
      exclude using gist (channel_id with =, during with &&)
    );
    create index probe_placements_piece on probe_placements (piece_id) where piece_id is not null;
    create index probe_placements_cooker on probe_placements using gist (cooker_id, during) where cooker_id is not null;

    create table events (
      id uuid primary key,
      site_id integer not null references sites,
      piece_id integer references pieces,
      cooker_id integer references cookers,
      kind text not null,
      fact jsonb not null,
      note text,
      happened_at timestamptz not null,
      recorded_at timestamptz not null,
      user_id integer references users,
      corrects_id uuid references events,
      -- What the pit was set to before a change of it: taking the change back, and reading the night later, need it.
      pit_set_before_c double precision check (pit_set_before_c is null or kind = 'pit_set'),
      check (num_nonnulls(piece_id, cooker_id) = 1),
      check (fact ->> 'kind' = kind)
    );
    create index events_piece on events (piece_id, happened_at) where piece_id is not null;
    create index events_cooker on events (cooker_id, happened_at) where cooker_id is not null;
    -- An entry is corrected once; the next correction corrects the correction.
    create unique index events_corrects on events (corrects_id) where corrects_id is not null;

    create function events_are_append_only() returns trigger language plpgsql as $$
    begin
      raise exception 'events are append-only: correct an entry with a new one';
    end $$;
    create trigger events_append_only before update or delete on events
      for each row execute function events_are_append_only();

    create table forecasts (
      piece_id integer not null references pieces on delete cascade,
      made_at timestamptz not null,
      phase text not null check (phase in ('rise', 'stall', 'push', 'wrapped', 'done')),
      wrap_quantiles timestamptz[] check (cardinality(wrap_quantiles) = 5),
      wrap_reason text,
      wrap_reached_at timestamptz,
      pull_quantiles timestamptz[] check (cardinality(pull_quantiles) = 5),
      pull_reason text,
      model text not null,
      primary key (piece_id, made_at),
      check (pull_quantiles is null or pull_reason is null),
      check (wrap_quantiles is null or wrap_reason is null)
    );

    -- The fan of the newest forecast only: kept for every one it would be most of the database.
    create table forecast_fans (
      piece_id integer primary key references pieces on delete cascade,
      made_at timestamptz not null,
      fan jsonb not null
    );

    -- What the house's finished cooks taught the forecast; the newest row is used.
    create table house_models (
      id integer generated always as identity primary key,
      made_at timestamptz not null,
      cooks integer not null check (cooks >= 0),
      model jsonb not null
    );
  `)
}

export async function down(knex: Knex): Promise<void> {
  await knex.raw(`
    drop table house_models, forecast_fans, forecasts, events, probe_placements, placements, pieces, services, recipes;
    drop function events_are_append_only()
  `)
}
