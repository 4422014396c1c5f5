-- What looks suspicious, and how far each follower of the ledger has read.

-- A follower writes its result and its position in one transaction, so that neither is ever without the other.
create table follower (
    volume_id int    not null references volume (volume_id),
    name      text   not null,
    position  bigint not null,
    primary key (volume_id, name)
);
comment on column follower.position is 'the last entry whose consequences are stored';

create table finding (
    finding_id  bigint generated always as identity primary key,
    volume_id   int              not null references volume (volume_id),
    detector    text             not null,
    family      text             not null,
    kind        text             not null,
    place       text             not null,
    segments    bigint[]         not null,
    point_nm    double precision[] not null,
    evidence    jsonb            not null,
    said        text             not null,
    probability double precision not null,
    moves       double precision not null,
    gain        double precision not null,
    proposal    jsonb,
    made        bigint           not null,
    retired     bigint,
    constraint finding_kind check (kind in ('false-merge', 'false-split')),
    constraint finding_segments check (cardinality(segments) > 0),
    constraint finding_point check (cardinality(point_nm) = 3),
    constraint finding_probability check (probability > 0 and probability <= 1),
    constraint finding_gain check (gain >= 0),
    constraint finding_span check (retired >= made)
);
comment on column finding.place is 'names the place by its supervoxels, the same while segment ids come and go';
comment on column finding.made is 'the position up to which the ledger had been read when it was found';
create unique index finding_once on finding (volume_id, detector, place) where retired is null;
create index finding_by_segment on finding using gin (segments) where retired is null;
create index finding_by_gain on finding (volume_id, gain desc, finding_id) where retired is null;

insert into schema_done (version) values (4);
