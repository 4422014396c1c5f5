-- The ledger: entries, and the segments and pieces that follow from them.
--
-- Truth is `volume` (what the segmentation said) and `entry` (what people said). `head`, `segment` and
-- `piece` are a cache of those two that `fettled reconcile` recomputes and compares.

-- One row a volume: the last position, and the two counters an entry draws from. Its row lock is what keeps
-- positions gapless when several processes post on one volume.
create table head (
    volume_id int    not null primary key references volume (volume_id),
    position  bigint not null default 0,
    minted    bigint not null default 0,
    groups    bigint not null,
    constraint head_counters check (position >= 0 and minted >= 0 and groups >= 0)
);
comment on column head.minted is 'how many segment ids have been drawn from the run that starts at volume.mint_from';
comment on column head.groups is 'the next internal group number; numbers below the count of base segments are theirs';

create table entry (
    volume_id       int         not null,
    position        bigint      not null,
    entry_id        uuid        not null,
    kind            text        not null,
    person          text        not null,
    agent           text,
    posted_at       timestamptz not null,
    task_id         uuid,
    reason          text        not null,
    reverses        bigint,
    before          bigint[]    not null,
    after           bigint[]    not null,
    joined_contacts bigint[]    not null,
    joined_links    bigint[]    not null,
    cut_contacts    bigint[]    not null,
    cut_links       bigint[]    not null,
    cost            bigint,
    content         bytea       not null,
    leaf_hash       bytea       not null,
    primary key (volume_id, position),
    constraint entry_once unique (entry_id),
    constraint entry_position check (position > 0),
    constraint entry_kind check (kind in ('merge', 'split', 'reversal')),
    constraint entry_person check (person <> ''),
    constraint entry_reverses check ((kind = 'reversal') = (reverses is not null) and reverses < position),
    constraint entry_pairs check (cardinality(joined_contacts) % 2 = 0 and cardinality(joined_links) % 2 = 0
                              and cardinality(cut_contacts) % 2 = 0 and cardinality(cut_links) % 2 = 0),
    constraint entry_leaf check (octet_length(leaf_hash) = 32)
);
comment on column entry.content is 'the exact RFC 8785 bytes that were hashed; never rebuilt from the other columns';
comment on column entry.joined_links is 'supervoxel ids, two a pair, that became accepted by this entry; likewise the three beside it';
comment on column entry.cost is 'of a split: the minimum cut, equal to the maximum flow, in 1e-6 of log-odds';
create index entry_by_person on entry (volume_id, person, position);
-- Times never run backwards along positions, so rows of one time lie together on disk, and a summary of each stretch of
-- pages is enough.
create index entry_by_time on entry using brin (posted_at);
create index entry_by_task on entry (task_id) where task_id is not null;
create unique index entry_reversed_once on entry (volume_id, reverses) where reverses is not null;

-- Nothing is ever erased: whoever is connected, superuser or not, meets the trigger. DELETE and TRUNCATE are
-- taken from the owning role as well. (UPDATE has to stay with the owner, because PostgreSQL asks for it when a
-- foreign key that points here locks its row; the trigger refuses the update itself.)
create function entry_is_final() returns trigger language plpgsql as $$
begin
    raise exception 'entries of the ledger are never changed or removed; post a reversal'
        using errcode = 'FE001', constraint = 'entry_is_final';
end $$;
create trigger entry_is_final before update or delete or truncate on entry
    for each statement execute function entry_is_final();
revoke delete, truncate on entry from current_user;

-- Positions are 1, 2, 3 ... without a gap: the rows of a statement follow each other, the first stands on its predecessor, and the
-- volume's head has been moved over the last. Once a statement, not once a row, so that a group of entries pays for it once. (Plans made while a table is young would read all
-- of it, and stay so while it grows; hence the settings, here and below.)
create function entry_gapless() returns trigger language plpgsql set enable_seqscan = off set enable_bitmapscan = off as $$
declare
    run record;
begin
    for run in select volume_id, min(position) as lo, max(position) as hi, count(*) as n from added group by volume_id loop
        if run.hi - run.lo + 1 <> run.n
           or run.lo > 1 and not exists (select from entry e where e.volume_id = run.volume_id and e.position = run.lo - 1) then
            raise exception 'positions of a volume have no gap' using errcode = 'FE002', constraint = 'entry_gapless';
        elsif not exists (select from head h where h.volume_id = run.volume_id and h.position >= run.hi) then
            raise exception 'the head of the volume is moved first' using errcode = 'FE009', constraint = 'entry_below_head';
        end if;
    end loop;
    return null;
end $$;
create trigger entry_gapless after insert on entry
    referencing new table as added for each statement execute function entry_gapless();

-- A segment that an entry touched. Base segments that nobody has touched have no row. (No foreign key to volume, here and in
-- piece: an entry's row stands for it, and five checks an entry would cost more than the entry.)
create table segment (
    volume_id    int    not null,
    segment_id   bigint not null,
    grp          bigint not null,
    born         bigint not null,
    retired      bigint,
    supervoxels  bigint not null,
    voxels       bigint not null,
    synapses_in  bigint not null,
    synapses_out bigint not null,
    nuclei       bigint not null,
    bounds_nm    bigint[] not null,
    primary key (volume_id, segment_id),
    constraint segment_span check (born >= 0 and retired > born),
    constraint segment_holds check (supervoxels > 0 and voxels >= 0 and synapses_in >= 0 and synapses_out >= 0 and nuclei >= 0),
    constraint segment_bounds check (cardinality(bounds_nm) = 6)
);
comment on column segment.born is 'the position that made it; 0 for the delivery';
comment on column segment.retired is 'the position that changed it into other segments; null while it is current';
comment on column segment.bounds_nm is 'smallest x, y, z and largest x, y, z of its supervoxels, nm';
-- A group is one segment after another. (That only the last is current is not a unique index of its own: a large neuron's group is
-- reborn with every merge, and the check would wade through all its dead entries. Reconcile holds it.)
create unique index segment_of_group on segment (volume_id, grp, born);

-- Which group an ordinal range belongs to, and from which position up to which. Ordinals that no row covers belong
-- to the group of their own base segment.
create table piece (
    volume_id     int    not null,
    lo            bigint not null,
    hi            bigint not null,
    grp           bigint not null,
    from_position bigint not null,
    to_position   bigint,
    primary key (volume_id, lo, from_position),
    constraint piece_range check (lo >= 0 and hi > lo),
    constraint piece_span check (from_position > 0 and to_position > from_position),
    constraint piece_ordinals check (hi <= 4294967296),
    -- One group a supervoxel, at any position. Plain range types, so that no extension is needed; the volume stands in the upper
    -- bits of the ordinals, so that one range names both.
    constraint piece_one_group exclude using gist (
        int8range((volume_id::bigint << 32) + lo, (volume_id::bigint << 32) + hi) with &&,
        int8range(from_position, to_position) with &&)
);
-- Rows are appended as positions grow, so summaries of stretches of pages find those that changed after one.
create index piece_by_from on piece using brin (from_position);
create index piece_by_to on piece using brin (to_position);

-- End segments and pieces that a group of entries changed. Row by row, by the whole primary key: a join planned while the tables
-- were young would go through all of them, and stay so.
create function ledger_retire(volume int, ids bigint[], positions bigint[]) returns void language plpgsql set enable_seqscan = off as $$
begin
    for i in 1 .. cardinality(ids) loop
        update segment set retired = positions[i] where volume_id = volume and segment_id = ids[i];
    end loop;
end $$;
create function ledger_close(volume int, los bigint[], since bigint[], positions bigint[]) returns void language plpgsql
    set enable_seqscan = off as $$
begin
    for i in 1 .. cardinality(los) loop
        update piece set to_position = positions[i] where volume_id = volume and lo = los[i] and from_position = since[i];
    end loop;
end $$;

-- A cell that people follow by name, pinned to a supervoxel.
create table neuron (
    volume_id int         not null references volume (volume_id),
    name      text        not null,
    anchor    bigint      not null,
    added_by  text        not null,
    added_at  timestamptz not null default now(),
    primary key (volume_id, name),
    constraint neuron_anchor unique (volume_id, anchor),
    constraint neuron_name check (name <> '' and length(name) <= 100)
);

-- Moves the head from one position to a later one, or refuses: the compare-and-set that a group of entries begins
-- with. The row stays locked until the group commits.
create function ledger_advance(volume int, seen bigint, reached bigint, new_minted bigint, new_groups bigint)
returns void language plpgsql as $$
begin
    update head set position = reached, minted = new_minted, groups = new_groups
     where volume_id = volume and position = seen;
    if not found then
        raise exception 'the volume has moved on from position %', seen using errcode = 'FE003', constraint = 'ledger_advance';
    end if;
end $$;

insert into schema_done (version) values (3);
