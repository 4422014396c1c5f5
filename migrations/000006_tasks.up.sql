-- The work of people: tasks, who holds them, how they ended, who agreed.
--
-- A segment's open tasks stand in a line, best first, and only a task at the head of every line it stands in can be
-- claimed. task.waits counts the lines that it is not the head of. A line whose segment is leased has no head: all
-- of it waits. A task that a lead has assigned stands aside from the lines, so that its absent owner stops nobody.
--
-- Two locks keep that count right. Work on single claims takes the volume's queue lock shared, and then changes only
-- the lines of segments whose leases it holds; what moves many tasks at once takes it alone.

-- Closed lists of words. As domains they are checked where one is set; a check of the table would be prepared and run
-- at every change of a row, whatever it changes, and rows here change often.
create domain task_state as text constraint task_state check (value in ('open', 'claimed', 'resolved', 'accepted', 'returned', 'overtaken'));
create domain task_kind as text constraint task_kind check (value in ('false-merge', 'false-split'));
create domain task_worth as double precision constraint task_worth check (value between 0 and 1e300);
create domain task_segments as bigint[] constraint task_segments check (cardinality(value) > 0 and array_position(value, null) is null);
create domain task_waits as int constraint task_waits check (value >= 0);
create domain claim_end as text constraint claim_end check (value in ('resolved', 'released', 'expired', 'overtaken'));
create domain claim_outcome as text constraint claim_outcome check (value in ('corrected', 'sound', 'unclear'));

-- Where a task stands. These rows change at every step, so they are narrow, with few indexes and room on their pages.
create table task (
    volume_id   int           not null references volume (volume_id),
    number      bigint        not null,
    state       task_state    not null default 'open',
    waits       task_waits    not null default 0,
    head        boolean       not null generated always as (waits = 0 and assigned_to is null) stored,
    priority    task_worth    not null,
    kind        task_kind     not null,
    family      text          not null,
    segments    task_segments not null,
    assigned_to text          references person (handle),
    claim_id    uuid,
    primary key (volume_id, number)
) with (fillfactor = 70, autovacuum_vacuum_scale_factor = 0.05);
comment on column task.segments is 'ascending as unsigned numbers, each once';
comment on column task.waits is 'how many of its segments'' lines it is not the head of';
comment on column task.priority is 'expected synapses put right, a minute';
comment on column task.claim_id is 'the live claim, or the one that ended it';
-- The queue itself: the heads that anybody may claim.
create index task_ready on task (volume_id, priority desc, number) where state = 'open' and head;
create index task_assigned on task (volume_id, assigned_to, priority desc, number) where state = 'open' and assigned_to is not null;
create index task_to_review on task (volume_id, number) where state = 'resolved';

-- What triage said of a task's place: written when the task is made, and again when it moves.
create table task_place (
    volume_id   int              not null,
    number      bigint           not null,
    task_id     uuid             not null,
    place       text             not null,
    probability double precision not null,
    gain        double precision not null,
    minutes     double precision not null,
    point_nm    double precision[] not null,
    said        text             not null,
    findings    jsonb            not null,
    proposal    jsonb,
    made_at     timestamptz      not null default now(),
    primary key (volume_id, number),
    constraint task_place_task foreign key (volume_id, number) references task (volume_id, number),
    constraint task_place_id unique (task_id),
    constraint task_place_worth check (gain between 0 and 1e300 and minutes between 0 and 1e300 and probability between 0 and 1),
    constraint task_place_point check (cardinality(point_nm) = 3)
);
comment on column task_place.place is 'triage''s key of the place, the same under changing segment ids';

-- Which task each finding's place belongs to: the latest, if there were several. So that no two live tasks are about one.
create table task_key (
    volume_id int    not null,
    key       text   not null,
    number    bigint not null,
    constraint task_one_a_place primary key (volume_id, key)
);
create index task_key_by_task on task_key (volume_id, number);

-- Who stands in a segment's line: its open tasks that nobody was assigned. (Derived from task, as task_key is from
-- task_place; a foreign key would cost a large import of places more than the rows do.)
create table task_line (
    volume_id  int              not null,
    segment_id bigint           not null,
    priority   double precision not null,
    number     bigint           not null
) with (autovacuum_vacuum_scale_factor = 0.02);
create unique index task_line_order on task_line (volume_id, segment_id, priority desc, number);

create table claim (
    claim_id   uuid        not null,
    volume_id  int         not null,
    number     bigint      not null,
    person     text        not null references person (handle),
    claimed_at timestamptz not null default now(),
    until      timestamptz not null,
    ended_at   timestamptz,
    ended      claim_end,
    outcome    claim_outcome,
    note       text        not null default '',
    position   bigint,
    constraint claim_once primary key (claim_id),
    constraint claim_task foreign key (volume_id, number) references task (volume_id, number),
    constraint claim_entry foreign key (volume_id, position) references entry (volume_id, position),
    constraint claim_corrected check ((outcome is not distinct from 'corrected') = (position is not null))
);
comment on table claim is 'personal data: who worked on what, from when to when';
comment on column claim.position is 'the entry that corrected it';
create unique index claim_one_a_task on claim (volume_id, number) where ended is null;
create unique index claim_one_a_person on claim (volume_id, person) where ended is null;
create unique index claim_one_an_entry on claim (volume_id, position) where position is not null;
create index claim_by_end on claim (volume_id, ended_at) where ended is not null;

-- A segment in somebody's hands. The key is what makes two live claims on one segment impossible.
create table lease (
    volume_id  int    not null,
    segment_id bigint not null,
    claim_id   uuid   not null,
    constraint lease_one_a_segment primary key (volume_id, segment_id)
);

create table review (
    claim_id    uuid        primary key references claim (claim_id),
    person      text        not null references person (handle),
    verdict     text        not null,
    note        text        not null,
    reviewed_at timestamptz not null default now(),
    volume_id   int         not null references volume (volume_id),
    position    bigint,
    constraint review_verdict check (verdict in ('accept', 'return')),
    constraint review_entry foreign key (volume_id, position) references entry (volume_id, position),
    constraint review_note check (length(note) <= 2000)
);
comment on column review.position is 'the reversal, when a correction was returned';

create table task_event (
    volume_id int         not null,
    number    bigint      not null,
    event     bigint      not null generated always as identity,
    at        timestamptz not null default now(),
    person    text,
    what      text        not null,
    note      text        not null default '',
    primary key (volume_id, number, event)
);
comment on table task_event is 'everything that happened to a task; only ever appended to';
comment on column task_event.person is 'null: the program itself';

-- Rules that a key or a check can't state. Each refuses under a name, as constraints do.

create function refuse(rule text, message text) returns void language plpgsql as $$
begin
    raise exception '%', message using errcode = 'FE006', constraint = rule;
end $$;

create function history_is_final() returns trigger language plpgsql as $$
begin
    perform refuse('history_is_final', 'the history of tasks is never changed or removed');
end $$;
create trigger history_is_final before update or delete or truncate on task_event for each statement execute function history_is_final();
create trigger history_is_final before update or delete or truncate on review for each statement execute function history_is_final();
create trigger history_is_final before delete or truncate on claim for each statement execute function history_is_final();
create trigger history_is_final before delete or truncate on task for each statement execute function history_is_final();

-- An ended claim is closed for good: whoever overslept finds it so.
create function claim_is_live() returns trigger language plpgsql as $$
begin
    perform refuse('claim_live', 'the claim has ended');
end $$;
create trigger claim_is_live before update on claim for each row when (old.ended is not null) execute function claim_is_live();

-- Nobody reviews their own work, and a correction is returned by its reversal only.
create function review_fits() returns trigger language plpgsql as $$
declare
    c claim;
begin
    select * into c from claim where claim_id = new.claim_id;
    if c.ended is distinct from 'resolved' then
        perform refuse('review_resolved', 'only a resolved task can be reviewed');
    end if;
    if c.person = new.person then
        perform refuse('review_not_own', 'nobody reviews their own work');
    end if;
    if c.volume_id <> new.volume_id or (c.outcome = 'corrected' and new.verdict = 'return') <> (new.position is not null)
       or new.position is not null and not exists (
          select from entry where volume_id = c.volume_id and position = new.position and reverses = c.position) then
        perform refuse('review_reversal', 'a correction is returned together with the entry that reverses it');
    end if;
    return new;
end $$;
create trigger review_fits before insert on review for each row execute function review_fits();

-- The states' steps, and what each needs to have happened.
create function task_step() returns trigger language plpgsql as $$
declare
    fits boolean;
begin
    case old.state || ' > ' || new.state
    when 'open > claimed' then
        -- Held by a live claim, and every one of its segments leased to that claim.
        select c.ended is null and c.volume_id = new.volume_id and c.number = new.number
           and (select count(*) from lease l where l.volume_id = new.volume_id and l.segment_id = any (new.segments)
                                               and l.claim_id = new.claim_id) = cardinality(new.segments)
          into fits from claim c where c.claim_id = new.claim_id;
    when 'claimed > open', 'claimed > overtaken' then
        fits := not exists (select from claim where claim_id = old.claim_id and ended is null);
    when 'claimed > resolved' then
        -- With an outcome, and if that is a correction, with an entry that was posted for this task.
        select new.claim_id = old.claim_id and c.ended = 'resolved' and c.outcome is not null
           and (c.position is null or exists (
                select from entry e join task_place p on p.volume_id = e.volume_id and p.task_id = e.task_id
                 where e.volume_id = c.volume_id and e.position = c.position and p.number = new.number))
          into fits from claim c where c.claim_id = new.claim_id;
    when 'resolved > accepted' then
        fits := new.claim_id = old.claim_id and exists (select from review where claim_id = new.claim_id and verdict = 'accept');
    when 'resolved > returned' then
        fits := new.claim_id = old.claim_id and exists (select from review where claim_id = new.claim_id and verdict = 'return');
    when 'open > overtaken' then
        fits := true;
    else
        fits := false;
    end case;
    if fits is not true then
        perform refuse('task_step', format('task %s can''t go from %s to %s now', new.number, old.state, new.state));
    end if;
    return new;
end $$;
create trigger task_step before update of state on task for each row when (old.state <> new.state) execute function task_step();

create function task_starts() returns trigger language plpgsql as $$
begin
    perform refuse('task_step', 'a task starts open');
end $$;
create trigger task_starts before insert on task for each row when (new.state <> 'open') execute function task_starts();

-- The queue lock of a volume, until the transaction ends. 1952543595 spells "task". (SQL functions, which vanish into
-- the query that calls them.)
create function task_lock(volume int) returns void language sql as $$
    select pg_advisory_xact_lock_shared(1952543595, volume)
$$;
create function task_lock_alone(volume int) returns void language sql as $$
    select pg_advisory_xact_lock(1952543595, volume)
$$;

-- Claims the task wanted, or the best that this person may have, and returns it with the claim; nulls when there is
-- none. One assigned to them goes before all others.
create function task_claim(volume int, who text, wanted bigint, kinds text[], families text[], id uuid, lasts interval,
                           out t task, out c claim)
language plpgsql set plan_cache_mode = force_generic_plan set enable_seqscan = off set enable_bitmapscan = off as $$
declare
    holds boolean;
    alone boolean;
begin
    -- One claim of a person at a time: whoever asks twice waits here. (Then holds is what it was before the wait, and
    -- claim_one_a_person refuses.)
    select exists (select from claim x where x.volume_id = volume and x.person = who and x.ended is null),
           wanted is not null or exists (select from task x where x.volume_id = volume and x.assigned_to = who and x.state = 'open')
      into holds, alone
      from person where handle = who and left_at is null and 'proofreader' = any (roles) for no key update;
    if not found then
        perform refuse('claim_proofreader', 'only a proofreader claims');
    elsif holds then
        perform refuse('claim_one_a_person', 'this person holds a task');
    end if;
    if alone then
        perform task_lock_alone(volume);
    else
        perform task_lock(volume);
    end if;
    if wanted is not null then
        select * into t from task x where x.volume_id = volume and x.number = wanted for update;
        perform task_claimable(t, who);
    end if;
    if wanted is null and alone then
        select * into t from task x
         where x.volume_id = volume and x.assigned_to = who and x.state = 'open'
           and (kinds is null or x.kind = any (kinds)) and (families is null or x.family = any (families))
           and not exists (select from lease l where l.volume_id = volume and l.segment_id = any (x.segments))
           and not exists (select from segment g where g.volume_id = volume and g.segment_id = any (x.segments) and g.retired is not null)
         order by x.priority desc, x.number limit 1 for update;
    end if;
    if t.number is null then
        select * into t from task x
         where x.volume_id = volume and x.state = 'open' and x.head
           and (kinds is null or x.kind = any (kinds)) and (families is null or x.family = any (families))
           and not exists (select from segment g where g.volume_id = volume and g.segment_id = any (x.segments) and g.retired is not null)
         order by x.priority desc, x.number limit 1 for update of x skip locked;
    end if;
    if t.number is null then
        return;
    end if;
    with claimed as (
         insert into claim (claim_id, volume_id, number, person, until) values (id, volume, t.number, who, now() + lasts) returning *),
    leased as (
         insert into lease (volume_id, segment_id, claim_id) select volume, s, id from unnest(t.segments) s),
    left_lines as (
         delete from task_line l
          where t.assigned_to is null and l.volume_id = volume and l.segment_id = any (t.segments) and l.priority = t.priority and l.number = t.number),
    noted as (
         insert into task_event (volume_id, number, person, what) values (volume, t.number, who, 'claimed'))
    select * into c from claimed;
    if t.assigned_to is not null then
        perform heads_wait(t);
    end if;
    update task x set state = 'claimed', claim_id = id where x.volume_id = volume and x.number = t.number returning * into t;
end $$;

-- Makes the heads wait of lines whose segments were leased to a task that does not stand in them.
create function heads_wait(t task) returns void language plpgsql as $$
begin
    update task x set waits = x.waits + h.lines
      from (select f.number, count(*) lines from unnest(t.segments) s cross join lateral task_head(t.volume_id, s) f group by f.number) h
     where x.volume_id = t.volume_id and x.number = h.number;
end $$;

-- Leases to a claim the segments that its task has moved to. If one is in other hands the claim ends; the answer is
-- whether the task has to stand in lines then. The caller has the queue lock alone.
create function claim_move(volume int, moved bigint) returns boolean language plpgsql as $$
declare
    t task;
begin
    select * into t from task x where x.volume_id = volume and x.number = moved;
    if exists (select from lease l where l.volume_id = volume and l.segment_id = any (t.segments)) then
        update claim set ended = 'overtaken', ended_at = now() where claim_id = t.claim_id;
        update task x set state = 'open', claim_id = null where x.volume_id = volume and x.number = moved;
        insert into task_event (volume_id, number, what, note) values (volume, moved, 'released', 'its segment came into other hands');
        return t.assigned_to is null;
    end if;
    insert into lease (volume_id, segment_id, claim_id) select volume, s, t.claim_id from unnest(t.segments) s;
    perform heads_wait(t);
    return false;
end $$;

-- Refuses a task that this person can't claim now.
create function task_claimable(t task, who text) returns void language plpgsql as $$
begin
    if t.number is null then
        perform refuse('task_known', 'there is no such task');
    elsif t.state <> 'open' then
        perform refuse('task_open', 'the task is not open');
    elsif t.assigned_to <> who then
        perform refuse('task_assigned', 'the task is assigned to somebody else');
    elsif exists (select from segment g where g.volume_id = t.volume_id and g.segment_id = any (t.segments) and g.retired is not null) then
        perform refuse('task_settling', 'a segment of the task has just changed');
    elsif exists (select from lease l where l.volume_id = t.volume_id and l.segment_id = any (t.segments)) then
        perform refuse('segment_held', 'somebody holds a segment of the task');
    elsif t.waits > 0 then
        perform refuse('task_head', 'another task comes first');
    end if;
end $$;

-- The first of a segment's line.
create function task_head(volume int, segment bigint) returns table (number bigint, priority double precision) language sql stable rows 1 as $$
    select l.number, l.priority from task_line l where l.volume_id = volume and l.segment_id = segment
     order by l.priority desc, l.number limit 1
$$;

-- Refuses who has no such claim (who is null for the program itself), takes the queue lock, and returns the volume.
-- Whether the claim is still live is for claim_is_live to say, when the caller updates it.
create function claim_enter(id uuid, who text) returns int language plpgsql as $$
declare
    c record;
begin
    select volume_id, person into c from claim where claim_id = id;
    if not found then
        perform refuse('claim_known', 'there is no such claim');
    elsif c.person <> who then
        perform refuse('claim_own', 'the claim is somebody else''s');
    end if;
    perform task_lock(c.volume_id);
    return c.volume_id;
end $$;

-- Gives up the leases of a claim's task, and lets those step forward who stand first now. A task that comes back
-- (rank is its priority, null when it does not) goes before the worse ones; the answer is how many lines it is not
-- the head of. Rows are changed in the order of their numbers, so that two that end at once don't lock each other out.
create function lease_end(id uuid, t task, rank double precision) returns int language plpgsql as $$
declare
    f     record;
    waits int := 0;
begin
    for f in
        with given_up as (
             delete from lease l where l.volume_id = t.volume_id and l.segment_id = any (t.segments) and l.claim_id = id)
        select h.number, count(*) lines
          from unnest(t.segments) s cross join lateral task_head(t.volume_id, s) h
         where rank is null or h.priority > rank or h.priority = rank and h.number < t.number
         group by h.number order by h.number
    loop
        update task x set waits = x.waits - f.lines where x.volume_id = t.volume_id and x.number = f.number;
        waits := waits + f.lines;
    end loop;
    return waits;
end $$;

-- Ends a claim without an outcome: the task is open again. A claim that is to expire must have run out; one that was
-- extended meanwhile is left alone, and the answer is false.
create function claim_give_up(id uuid, who text, how text, why text) returns boolean language plpgsql as $$
declare
    c claim;
    t task;
    n int := 0;
begin
    perform claim_enter(id, who);
    update claim set ended = how, ended_at = now(), note = why
     where claim_id = id and (how <> 'expired' or until <= now()) returning * into c;
    if not found then
        return false;
    end if;
    select * into t from task x where x.volume_id = c.volume_id and x.number = c.number for update;
    if t.assigned_to is null then
        n := lease_end(id, t, t.priority);
        insert into task_line (volume_id, segment_id, priority, number) select t.volume_id, s, t.priority, t.number from unnest(t.segments) s;
    else
        perform lease_end(id, t, null);
    end if;
    update task x set state = 'open', claim_id = null, waits = n where x.volume_id = t.volume_id and x.number = t.number;
    insert into task_event (volume_id, number, person, what, note)
    values (t.volume_id, t.number, case when how = 'expired' then c.person else who end, how, why);
    return true;
end $$;

-- Gives a live claim a whole lease again, from now.
create function claim_extend(id uuid, who text, lasts interval) returns claim language plpgsql as $$
declare
    c claim;
begin
    perform claim_enter(id, who);
    update claim set until = greatest(until, now() + lasts) where claim_id = id returning * into c;
    insert into task_event (volume_id, number, person, what) values (c.volume_id, c.number, who, 'extended');
    return c;
end $$;

-- Refuses when somebody else holds one of these segments.
create function segments_unheld(volume int, who text, segments bigint[]) returns void language plpgsql as $$
begin
    if exists (select from lease l join claim c using (claim_id)
                where l.volume_id = volume and l.segment_id = any (segments) and c.person <> who and c.until > now()) then
        perform refuse('segment_held', 'somebody else holds a segment of this correction');
    end if;
end $$;

-- Ends a claim with an outcome, and returns the task and the claim. of_entry and changed are the position of the
-- correction and the segments it changes.
create function claim_resolve(id uuid, who text, how text, why text, of_entry bigint, changed bigint[], out t task, out c claim)
language plpgsql set plan_cache_mode = force_generic_plan set enable_seqscan = off set enable_bitmapscan = off as $$
declare
    volume int := claim_enter(id, who);
    waits  int;
begin
    with resolved as (
         update claim set ended = 'resolved', ended_at = now(), outcome = how, note = why, position = of_entry
          where claim_id = id returning *),
    noted as (
         insert into task_event (volume_id, number, person, what, note) select volume, number, who, 'resolved', how from resolved)
    select * into c from resolved;
    update task x set state = 'resolved' where x.volume_id = volume and x.number = c.number returning * into t;
    if of_entry is not null then
        if not changed && t.segments then
            perform refuse('claim_corrects', 'the correction changes none of the task''s segments');
        end if;
        perform segments_unheld(volume, who, changed);
    end if;
    waits := lease_end(id, t, null);
end $$;

-- Stores what a second person said. reversal is the position of the entry that undid a returned correction, and
-- changed are the segments it changes.
create function task_review(volume int, reviewed bigint, who text, says text, why text, reversal bigint, changed bigint[])
returns void language plpgsql as $$
declare
    t task;
begin
    perform segments_unheld(volume, who, changed);
    select * into t from task x where x.volume_id = volume and x.number = reviewed for update;
    if not found then
        perform refuse('task_known', 'there is no such task');
    elsif t.state <> 'resolved' then
        perform refuse('task_resolved', 'the task does not wait for a review');
    end if;
    insert into review (claim_id, person, verdict, note, volume_id, position) values (t.claim_id, who, says, why, volume, reversal);
    update task x set state = case says when 'accept' then 'accepted' else 'returned' end where x.volume_id = volume and x.number = reviewed;
    insert into task_event (volume_id, number, person, what, note)
    values (volume, reviewed, who, case says when 'accept' then 'accepted' else 'returned' end, why);
end $$;

-- Open tasks enter the lines of their segments. The caller has the queue lock alone.
create function line_join(volume int, joining bigint[]) returns void language plpgsql as $$
begin
    -- Heads that the best of the newcomers stands before.
    with best as (
        select distinct on (s) s, t.priority, t.number
          from task t cross join lateral unnest(t.segments) s
         where t.volume_id = volume and t.number = any (joining)
         order by s, t.priority desc, t.number),
    displaced as (
        select h.number, count(*) lines
          from best b cross join lateral task_head(volume, b.s) h
         where (h.priority < b.priority or h.priority = b.priority and h.number > b.number)
           and not exists (select from lease l where l.volume_id = volume and l.segment_id = b.s)
         group by h.number)
    update task x set waits = x.waits + d.lines from displaced d where x.volume_id = volume and x.number = d.number;

    insert into task_line (volume_id, segment_id, priority, number)
    select volume, s, t.priority, t.number from task t cross join lateral unnest(t.segments) s
     where t.volume_id = volume and t.number = any (joining)
     order by s, t.priority desc, t.number;

    update task x set waits = w.lines
      from (select t.number, count(*) filter (where h.number is distinct from t.number or l.claim_id is not null) lines
              from task t cross join lateral unnest(t.segments) s
              left join lateral task_head(volume, s) h on true
              left join lease l on l.volume_id = volume and l.segment_id = s
             where t.volume_id = volume and t.number = any (joining)
             group by t.number) w
     where x.volume_id = volume and x.number = w.number and x.waits <> w.lines;
end $$;

-- Tasks leave the lines they stand in. The caller has the queue lock alone.
create function line_leave(volume int, leaving bigint[]) returns void language plpgsql as $$
declare
    headless bigint[];
begin
    select array_agg(distinct s) into headless
      from task t cross join lateral unnest(t.segments) s cross join lateral task_head(volume, s) h
     where t.volume_id = volume and t.number = any (leaving) and h.number = any (leaving)
       and not exists (select from lease l where l.volume_id = volume and l.segment_id = s);
    delete from task_line l using task t
     where t.volume_id = volume and t.number = any (leaving)
       and l.volume_id = volume and l.segment_id = any (t.segments) and l.priority = t.priority and l.number = t.number;
    update task x set waits = x.waits - h.lines
      from (select f.number, count(*) lines from unnest(headless) s cross join lateral task_head(volume, s) f group by f.number) h
     where x.volume_id = volume and x.number = h.number;
    update task x set waits = 0 where x.volume_id = volume and x.number = any (leaving) and x.waits > 0;
end $$;

insert into schema_done (version) values (6);
