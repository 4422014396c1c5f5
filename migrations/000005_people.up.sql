-- People, and the tokens that prove who asks.

create table person (
    handle   text        primary key,
    roles    text[]      not null,
    added_by text        references person (handle),
    added_at timestamptz not null default now(),
    left_at  timestamptz,
    constraint person_handle check (handle ~ '^[a-z][a-z0-9-]{0,39}$' and handle <> 'operator'),
    constraint person_roles check (roles <@ array['proofreader', 'reviewer', 'lead', 'agent'] and array_position(roles, null) is null)
);
comment on table person is 'personal data; a handle signs entries, so a row is never removed and a handle never given to somebody else';
comment on column person.added_by is 'null: the operator of the machine';

create function person_stays() returns trigger language plpgsql as $$
begin
    raise exception 'people stay in the register; mark them as having left' using errcode = 'FE005', constraint = 'person_stays';
end $$;
create trigger person_stays before delete or truncate on person for each statement execute function person_stays();

create table token (
    token_id   uuid        primary key,
    handle     text        not null references person (handle),
    hash       bytea       not null,
    note       text        not null,
    issued_by  text        references person (handle),
    issued_at  timestamptz not null default now(),
    last_used  timestamptz,
    revoked_at timestamptz,
    revoked_by text        references person (handle),
    constraint token_hash unique (hash),
    constraint token_sha256 check (octet_length(hash) = 32),
    constraint token_note check (length(note) <= 200),
    constraint token_revoked check (revoked_at is not null or revoked_by is null)
);
comment on column token.hash is 'SHA-256 of the secret; the secret itself has 256 random bits, so that no salt is needed, and is not stored';
comment on column token.issued_by is 'null: the operator of the machine; likewise revoked_by';
create index token_by_handle on token (handle, issued_at);

insert into schema_done (version) values (5);
