-- What every other file stands on: which steps are whole.
--
-- A migration that was killed half-way leaves golang-migrate's mark "dirty", and that mark can't tell whether the
-- server went on and committed. Each file therefore ends with a row here, in the same transaction as its work.
create table schema_done (
    version bigint      not null primary key,
    at      timestamptz not null default now()
);

insert into schema_done (version) values (1);
