-- What a ledger has vouched for: the key it signs with, and the heads of its tree that were signed.

-- One Ed25519 key a volume, made when it is first needed. It is in the database and not in a file, so that every process of the
-- house signs with the same key and a restored backup goes on with it. Whoever can read this table can sign; what was vouched
-- for before is held against them by the checkpoints that auditors kept.
create table checkpoint_key (
    volume_id int         not null primary key references volume (volume_id),
    seed      bytea       not null,
    made_at   timestamptz not null default now(),
    constraint checkpoint_key_seed check (octet_length(seed) = 32)
);
comment on column checkpoint_key.seed is 'private: the Ed25519 seed of RFC 8032';

create table checkpoint (
    volume_id   int         not null references volume (volume_id),
    size        bigint      not null,
    signed_note text        not null,
    made_at     timestamptz not null default now(),
    primary key (volume_id, size),
    constraint checkpoint_size check (size >= 0)
);
comment on column checkpoint.size is 'entries it covers: the position of the last of them';
comment on column checkpoint.signed_note is 'C2SP tlog-checkpoint';

create function checkpoint_is_final() returns trigger language plpgsql as $$
begin
    raise exception 'checkpoints and their keys are never changed or removed'
        using errcode = 'FE007', constraint = 'checkpoint_is_final';
end $$;
create trigger checkpoint_is_final before update or delete or truncate on checkpoint
    for each statement execute function checkpoint_is_final();
create trigger checkpoint_is_final before update or delete or truncate on checkpoint_key
    for each statement execute function checkpoint_is_final();

insert into schema_done (version) values (7);
