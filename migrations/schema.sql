CREATE DOMAIN public.claim_end AS text
	CONSTRAINT claim_end CHECK ((VALUE = ANY (ARRAY['resolved'::text, 'released'::text, 'expired'::text, 'overtaken'::text])));

CREATE DOMAIN public.claim_outcome AS text
	CONSTRAINT claim_outcome CHECK ((VALUE = ANY (ARRAY['corrected'::text, 'sound'::text, 'unclear'::text])));

CREATE DOMAIN public.task_kind AS text
	CONSTRAINT task_kind CHECK ((VALUE = ANY (ARRAY['false-merge'::text, 'false-split'::text])));

CREATE DOMAIN public.task_segments AS bigint[]
	CONSTRAINT task_segments CHECK (((cardinality(VALUE) > 0) AND (array_position(VALUE, NULL::bigint) IS NULL)));

CREATE DOMAIN public.task_state AS text
	CONSTRAINT task_state CHECK ((VALUE = ANY (ARRAY['open'::text, 'claimed'::text, 'resolved'::text, 'accepted'::text, 'returned'::text, 'overtaken'::text])));

CREATE DOMAIN public.task_waits AS integer
	CONSTRAINT task_waits CHECK ((VALUE >= 0));

CREATE DOMAIN public.task_worth AS double precision
	CONSTRAINT task_worth CHECK (((VALUE >= (0)::double precision) AND (VALUE <= ('1000000000000000000000000000000000000000000000000000000000000000000000000000000000000000000000000000000000000000000000000000000000000000000000000000000000000000000000000000000000000000000000000000000000000000000000000000000000000000000000000000000000000000000000000000000000000000000000000000000000000'::numeric)::double precision)));

CREATE FUNCTION public.base_is_final() RETURNS trigger
    LANGUAGE plpgsql
    AS $$
begin
    raise exception 'what was delivered is never changed; import a new delivery under another name'
        using errcode = 'FE004', constraint = 'base_is_final';
end $$;

CREATE FUNCTION public.checkpoint_is_final() RETURNS trigger
    LANGUAGE plpgsql
    AS $$
begin
    raise exception 'checkpoints and their keys are never changed or removed'
        using errcode = 'FE007', constraint = 'checkpoint_is_final';
end $$;

CREATE FUNCTION public.claim_enter(id uuid, who text) RETURNS integer
    LANGUAGE plpgsql
    AS $$
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

CREATE TABLE public.claim (
    claim_id uuid NOT NULL,
    volume_id integer NOT NULL,
    number bigint NOT NULL,
    person text NOT NULL,
    claimed_at timestamp with time zone DEFAULT now() NOT NULL,
    until timestamp with time zone NOT NULL,
    ended_at timestamp with time zone,
    ended public.claim_end,
    outcome public.claim_outcome,
    note text DEFAULT ''::text NOT NULL,
    "position" bigint,
    CONSTRAINT claim_corrected CHECK (((NOT ((outcome)::text IS DISTINCT FROM 'corrected'::text)) = ("position" IS NOT NULL)))
);

COMMENT ON TABLE public.claim IS 'personal data: who worked on what, from when to when';

COMMENT ON COLUMN public.claim."position" IS 'the entry that corrected it';

CREATE FUNCTION public.claim_extend(id uuid, who text, lasts interval) RETURNS public.claim
    LANGUAGE plpgsql
    AS $$
declare
    c claim;
begin
    perform claim_enter(id, who);
    update claim set until = greatest(until, now() + lasts) where claim_id = id returning * into c;
    insert into task_event (volume_id, number, person, what) values (c.volume_id, c.number, who, 'extended');
    return c;
end $$;

CREATE FUNCTION public.claim_give_up(id uuid, who text, how text, why text) RETURNS boolean
    LANGUAGE plpgsql
    AS $$
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

CREATE FUNCTION public.claim_is_live() RETURNS trigger
    LANGUAGE plpgsql
    AS $$
begin
    perform refuse('claim_live', 'the claim has ended');
end $$;

CREATE FUNCTION public.claim_move(volume integer, moved bigint) RETURNS boolean
    LANGUAGE plpgsql
    AS $$
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

CREATE TABLE public.task (
    volume_id integer NOT NULL,
    number bigint NOT NULL,
    state public.task_state DEFAULT 'open'::text NOT NULL,
    waits public.task_waits DEFAULT 0 NOT NULL,
    head boolean GENERATED ALWAYS AS ((((waits)::integer = 0) AND (assigned_to IS NULL))) STORED NOT NULL,
    priority public.task_worth NOT NULL,
    kind public.task_kind NOT NULL,
    family text NOT NULL,
    segments public.task_segments NOT NULL,
    assigned_to text,
    claim_id uuid
)
WITH (fillfactor='70', autovacuum_vacuum_scale_factor='0.05');

COMMENT ON COLUMN public.task.waits IS 'how many of its segments'' lines it is not the head of';

COMMENT ON COLUMN public.task.priority IS 'expected synapses put right, a minute';

COMMENT ON COLUMN public.task.segments IS 'ascending as unsigned numbers, each once';

COMMENT ON COLUMN public.task.claim_id IS 'the live claim, or the one that ended it';

CREATE FUNCTION public.claim_resolve(id uuid, who text, how text, why text, of_entry bigint, changed bigint[], OUT t public.task, OUT c public.claim) RETURNS record
    LANGUAGE plpgsql
    SET plan_cache_mode TO 'force_generic_plan'
    SET enable_seqscan TO 'off'
    SET enable_bitmapscan TO 'off'
    AS $$
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

CREATE FUNCTION public.entry_gapless() RETURNS trigger
    LANGUAGE plpgsql
    SET enable_seqscan TO 'off'
    SET enable_bitmapscan TO 'off'
    AS $$
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

CREATE FUNCTION public.entry_is_final() RETURNS trigger
    LANGUAGE plpgsql
    AS $$
begin
    raise exception 'entries of the ledger are never changed or removed; post a reversal'
        using errcode = 'FE001', constraint = 'entry_is_final';
end $$;

CREATE FUNCTION public.heads_wait(t public.task) RETURNS void
    LANGUAGE plpgsql
    AS $$
begin
    update task x set waits = x.waits + h.lines
      from (select f.number, count(*) lines from unnest(t.segments) s cross join lateral task_head(t.volume_id, s) f group by f.number) h
     where x.volume_id = t.volume_id and x.number = h.number;
end $$;

CREATE FUNCTION public.history_is_final() RETURNS trigger
    LANGUAGE plpgsql
    AS $$
begin
    perform refuse('history_is_final', 'the history of tasks is never changed or removed');
end $$;

CREATE FUNCTION public.lease_end(id uuid, t public.task, rank double precision) RETURNS integer
    LANGUAGE plpgsql
    AS $$
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

CREATE FUNCTION public.ledger_advance(volume integer, seen bigint, reached bigint, new_minted bigint, new_groups bigint) RETURNS void
    LANGUAGE plpgsql
    AS $$
begin
    update head set position = reached, minted = new_minted, groups = new_groups
     where volume_id = volume and position = seen;
    if not found then
        raise exception 'the volume has moved on from position %', seen using errcode = 'FE003', constraint = 'ledger_advance';
    end if;
end $$;

CREATE FUNCTION public.ledger_close(volume integer, los bigint[], since bigint[], positions bigint[]) RETURNS void
    LANGUAGE plpgsql
    SET enable_seqscan TO 'off'
    AS $$
begin
    for i in 1 .. cardinality(los) loop
        update piece set to_position = positions[i] where volume_id = volume and lo = los[i] and from_position = since[i];
    end loop;
end $$;

CREATE FUNCTION public.ledger_retire(volume integer, ids bigint[], positions bigint[]) RETURNS void
    LANGUAGE plpgsql
    SET enable_seqscan TO 'off'
    AS $$
begin
    for i in 1 .. cardinality(ids) loop
        update segment set retired = positions[i] where volume_id = volume and segment_id = ids[i];
    end loop;
end $$;

CREATE FUNCTION public.line_join(volume integer, joining bigint[]) RETURNS void
    LANGUAGE plpgsql
    AS $$
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

CREATE FUNCTION public.line_leave(volume integer, leaving bigint[]) RETURNS void
    LANGUAGE plpgsql
    AS $$
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

CREATE FUNCTION public.person_stays() RETURNS trigger
    LANGUAGE plpgsql
    AS $$
begin
    raise exception 'people stay in the register; mark them as having left' using errcode = 'FE005', constraint = 'person_stays';
end $$;

CREATE FUNCTION public.refuse(rule text, message text) RETURNS void
    LANGUAGE plpgsql
    AS $$
begin
    raise exception '%', message using errcode = 'FE006', constraint = rule;
end $$;

CREATE FUNCTION public.review_fits() RETURNS trigger
    LANGUAGE plpgsql
    AS $$
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

CREATE FUNCTION public.segments_unheld(volume integer, who text, segments bigint[]) RETURNS void
    LANGUAGE plpgsql
    AS $$
begin
    if exists (select from lease l join claim c using (claim_id)
                where l.volume_id = volume and l.segment_id = any (segments) and c.person <> who and c.until > now()) then
        perform refuse('segment_held', 'somebody else holds a segment of this correction');
    end if;
end $$;

CREATE FUNCTION public.task_claim(volume integer, who text, wanted bigint, kinds text[], families text[], id uuid, lasts interval, OUT t public.task, OUT c public.claim) RETURNS record
    LANGUAGE plpgsql
    SET plan_cache_mode TO 'force_generic_plan'
    SET enable_seqscan TO 'off'
    SET enable_bitmapscan TO 'off'
    AS $$
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

CREATE FUNCTION public.task_claimable(t public.task, who text) RETURNS void
    LANGUAGE plpgsql
    AS $$
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

CREATE FUNCTION public.task_head(volume integer, segment bigint) RETURNS TABLE(number bigint, priority double precision)
    LANGUAGE sql STABLE ROWS 1
    AS $$
    select l.number, l.priority from task_line l where l.volume_id = volume and l.segment_id = segment
     order by l.priority desc, l.number limit 1
$$;

CREATE FUNCTION public.task_lock(volume integer) RETURNS void
    LANGUAGE sql
    AS $$
    select pg_advisory_xact_lock_shared(1952543595, volume)
$$;

CREATE FUNCTION public.task_lock_alone(volume integer) RETURNS void
    LANGUAGE sql
    AS $$
    select pg_advisory_xact_lock(1952543595, volume)
$$;

CREATE FUNCTION public.task_review(volume integer, reviewed bigint, who text, says text, why text, reversal bigint, changed bigint[]) RETURNS void
    LANGUAGE plpgsql
    AS $$
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

CREATE FUNCTION public.task_starts() RETURNS trigger
    LANGUAGE plpgsql
    AS $$
begin
    perform refuse('task_step', 'a task starts open');
end $$;

CREATE FUNCTION public.task_step() RETURNS trigger
    LANGUAGE plpgsql
    AS $$
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

CREATE TABLE public.base_block (
    volume_id integer NOT NULL,
    section text NOT NULL,
    number integer NOT NULL,
    data bytea NOT NULL,
    CONSTRAINT base_block_number CHECK ((number >= 0)),
    CONSTRAINT base_block_section CHECK ((section = ANY (ARRAY['ids'::text, 'geometry'::text, 'accepted'::text, 'rejected'::text, 'segments'::text, 'boxes'::text, 'truth'::text])))
);
ALTER TABLE ONLY public.base_block ALTER COLUMN data SET STORAGE EXTERNAL;

CREATE TABLE public.base_nucleus (
    volume_id integer NOT NULL,
    nucleus_id bigint NOT NULL,
    supervoxel bigint NOT NULL,
    x_nm integer NOT NULL,
    y_nm integer NOT NULL,
    z_nm integer NOT NULL,
    volume_nm3 double precision NOT NULL
);

COMMENT ON COLUMN public.base_nucleus.supervoxel IS 'its ordinal';

CREATE TABLE public.base_synapse (
    volume_id integer NOT NULL,
    synapse_id bigint NOT NULL,
    pre bigint NOT NULL,
    post bigint NOT NULL,
    x_nm integer NOT NULL,
    y_nm integer NOT NULL,
    z_nm integer NOT NULL,
    confidence double precision NOT NULL,
    transmitter text
);

CREATE TABLE public.checkpoint (
    volume_id integer NOT NULL,
    size bigint NOT NULL,
    signed_note text NOT NULL,
    made_at timestamp with time zone DEFAULT now() NOT NULL,
    CONSTRAINT checkpoint_size CHECK ((size >= 0))
);

COMMENT ON COLUMN public.checkpoint.size IS 'entries it covers: the position of the last of them';

COMMENT ON COLUMN public.checkpoint.signed_note IS 'C2SP tlog-checkpoint';

CREATE TABLE public.checkpoint_key (
    volume_id integer NOT NULL,
    seed bytea NOT NULL,
    made_at timestamp with time zone DEFAULT now() NOT NULL,
    CONSTRAINT checkpoint_key_seed CHECK ((octet_length(seed) = 32))
);

COMMENT ON COLUMN public.checkpoint_key.seed IS 'private: the Ed25519 seed of RFC 8032';

CREATE TABLE public.entry (
    volume_id integer NOT NULL,
    "position" bigint NOT NULL,
    entry_id uuid NOT NULL,
    kind text NOT NULL,
    person text NOT NULL,
    agent text,
    posted_at timestamp with time zone NOT NULL,
    task_id uuid,
    reason text NOT NULL,
    reverses bigint,
    before bigint[] NOT NULL,
    after bigint[] NOT NULL,
    joined_contacts bigint[] NOT NULL,
    joined_links bigint[] NOT NULL,
    cut_contacts bigint[] NOT NULL,
    cut_links bigint[] NOT NULL,
    cost bigint,
    content bytea NOT NULL,
    leaf_hash bytea NOT NULL,
    CONSTRAINT entry_kind CHECK ((kind = ANY (ARRAY['merge'::text, 'split'::text, 'reversal'::text]))),
    CONSTRAINT entry_leaf CHECK ((octet_length(leaf_hash) = 32)),
    CONSTRAINT entry_pairs CHECK ((((cardinality(joined_contacts) % 2) = 0) AND ((cardinality(joined_links) % 2) = 0) AND ((cardinality(cut_contacts) % 2) = 0) AND ((cardinality(cut_links) % 2) = 0))),
    CONSTRAINT entry_person CHECK ((person <> ''::text)),
    CONSTRAINT entry_position CHECK (("position" > 0)),
    CONSTRAINT entry_reverses CHECK ((((kind = 'reversal'::text) = (reverses IS NOT NULL)) AND (reverses < "position")))
);

COMMENT ON COLUMN public.entry.joined_links IS 'supervoxel ids, two a pair, that became accepted by this entry; likewise the three beside it';

COMMENT ON COLUMN public.entry.cost IS 'of a split: the minimum cut, equal to the maximum flow, in 1e-6 of log-odds';

COMMENT ON COLUMN public.entry.content IS 'the exact RFC 8785 bytes that were hashed; never rebuilt from the other columns';

CREATE TABLE public.finding (
    finding_id bigint NOT NULL,
    volume_id integer NOT NULL,
    detector text NOT NULL,
    family text NOT NULL,
    kind text NOT NULL,
    place text NOT NULL,
    segments bigint[] NOT NULL,
    point_nm double precision[] NOT NULL,
    evidence jsonb NOT NULL,
    said text NOT NULL,
    probability double precision NOT NULL,
    moves double precision NOT NULL,
    gain double precision NOT NULL,
    proposal jsonb,
    made bigint NOT NULL,
    retired bigint,
    CONSTRAINT finding_gain CHECK ((gain >= (0)::double precision)),
    CONSTRAINT finding_kind CHECK ((kind = ANY (ARRAY['false-merge'::text, 'false-split'::text]))),
    CONSTRAINT finding_point CHECK ((cardinality(point_nm) = 3)),
    CONSTRAINT finding_probability CHECK (((probability > (0)::double precision) AND (probability <= (1)::double precision))),
    CONSTRAINT finding_segments CHECK ((cardinality(segments) > 0)),
    CONSTRAINT finding_span CHECK ((retired >= made))
);

COMMENT ON COLUMN public.finding.place IS 'names the place by its supervoxels, the same while segment ids come and go';

COMMENT ON COLUMN public.finding.made IS 'the position up to which the ledger had been read when it was found';

ALTER TABLE public.finding ALTER COLUMN finding_id ADD GENERATED ALWAYS AS IDENTITY (
    SEQUENCE NAME public.finding_finding_id_seq
    START WITH 1
    INCREMENT BY 1
    NO MINVALUE
    NO MAXVALUE
    CACHE 1
);

CREATE TABLE public.follower (
    volume_id integer NOT NULL,
    name text NOT NULL,
    "position" bigint NOT NULL
);

COMMENT ON COLUMN public.follower."position" IS 'the last entry whose consequences are stored';

CREATE TABLE public.head (
    volume_id integer NOT NULL,
    "position" bigint DEFAULT 0 NOT NULL,
    minted bigint DEFAULT 0 NOT NULL,
    groups bigint NOT NULL,
    CONSTRAINT head_counters CHECK ((("position" >= 0) AND (minted >= 0) AND (groups >= 0)))
);

COMMENT ON COLUMN public.head.minted IS 'how many segment ids have been drawn from the run that starts at volume.mint_from';

COMMENT ON COLUMN public.head.groups IS 'the next internal group number; numbers below the count of base segments are theirs';

CREATE TABLE public.lease (
    volume_id integer NOT NULL,
    segment_id bigint NOT NULL,
    claim_id uuid NOT NULL
);

CREATE TABLE public.neuron (
    volume_id integer NOT NULL,
    name text NOT NULL,
    anchor bigint NOT NULL,
    added_by text NOT NULL,
    added_at timestamp with time zone DEFAULT now() NOT NULL,
    CONSTRAINT neuron_name CHECK (((name <> ''::text) AND (length(name) <= 100)))
);

CREATE TABLE public.person (
    handle text NOT NULL,
    roles text[] NOT NULL,
    added_by text,
    added_at timestamp with time zone DEFAULT now() NOT NULL,
    left_at timestamp with time zone,
    CONSTRAINT person_handle CHECK (((handle ~ '^[a-z][a-z0-9-]{0,39}$'::text) AND (handle <> 'operator'::text))),
    CONSTRAINT person_roles CHECK (((roles <@ ARRAY['proofreader'::text, 'reviewer'::text, 'lead'::text, 'agent'::text]) AND (array_position(roles, NULL::text) IS NULL)))
);

COMMENT ON TABLE public.person IS 'personal data; a handle signs entries, so a row is never removed and a handle never given to somebody else';

COMMENT ON COLUMN public.person.added_by IS 'null: the operator of the machine';

CREATE TABLE public.piece (
    volume_id integer NOT NULL,
    lo bigint NOT NULL,
    hi bigint NOT NULL,
    grp bigint NOT NULL,
    from_position bigint NOT NULL,
    to_position bigint,
    CONSTRAINT piece_ordinals CHECK ((hi <= '4294967296'::bigint)),
    CONSTRAINT piece_range CHECK (((lo >= 0) AND (hi > lo))),
    CONSTRAINT piece_span CHECK (((from_position > 0) AND (to_position > from_position)))
);

CREATE TABLE public.review (
    claim_id uuid NOT NULL,
    person text NOT NULL,
    verdict text NOT NULL,
    note text NOT NULL,
    reviewed_at timestamp with time zone DEFAULT now() NOT NULL,
    volume_id integer NOT NULL,
    "position" bigint,
    CONSTRAINT review_note CHECK ((length(note) <= 2000)),
    CONSTRAINT review_verdict CHECK ((verdict = ANY (ARRAY['accept'::text, 'return'::text])))
);

COMMENT ON COLUMN public.review."position" IS 'the reversal, when a correction was returned';

CREATE TABLE public.schema_done (
    version bigint NOT NULL,
    at timestamp with time zone DEFAULT now() NOT NULL
);

CREATE TABLE public.schema_migrations (
    version bigint NOT NULL,
    dirty boolean NOT NULL
);

CREATE TABLE public.segment (
    volume_id integer NOT NULL,
    segment_id bigint NOT NULL,
    grp bigint NOT NULL,
    born bigint NOT NULL,
    retired bigint,
    supervoxels bigint NOT NULL,
    voxels bigint NOT NULL,
    synapses_in bigint NOT NULL,
    synapses_out bigint NOT NULL,
    nuclei bigint NOT NULL,
    bounds_nm bigint[] NOT NULL,
    CONSTRAINT segment_bounds CHECK ((cardinality(bounds_nm) = 6)),
    CONSTRAINT segment_holds CHECK (((supervoxels > 0) AND (voxels >= 0) AND (synapses_in >= 0) AND (synapses_out >= 0) AND (nuclei >= 0))),
    CONSTRAINT segment_span CHECK (((born >= 0) AND (retired > born)))
);

COMMENT ON COLUMN public.segment.born IS 'the position that made it; 0 for the delivery';

COMMENT ON COLUMN public.segment.retired IS 'the position that changed it into other segments; null while it is current';

COMMENT ON COLUMN public.segment.bounds_nm IS 'smallest x, y, z and largest x, y, z of its supervoxels, nm';

CREATE TABLE public.task_event (
    volume_id integer NOT NULL,
    number bigint NOT NULL,
    event bigint NOT NULL,
    at timestamp with time zone DEFAULT now() NOT NULL,
    person text,
    what text NOT NULL,
    note text DEFAULT ''::text NOT NULL
);

COMMENT ON TABLE public.task_event IS 'everything that happened to a task; only ever appended to';

COMMENT ON COLUMN public.task_event.person IS 'null: the program itself';

ALTER TABLE public.task_event ALTER COLUMN event ADD GENERATED ALWAYS AS IDENTITY (
    SEQUENCE NAME public.task_event_event_seq
    START WITH 1
    INCREMENT BY 1
    NO MINVALUE
    NO MAXVALUE
    CACHE 1
);

CREATE TABLE public.task_key (
    volume_id integer NOT NULL,
    key text NOT NULL,
    number bigint NOT NULL
);

CREATE TABLE public.task_line (
    volume_id integer NOT NULL,
    segment_id bigint NOT NULL,
    priority double precision NOT NULL,
    number bigint NOT NULL
)
WITH (autovacuum_vacuum_scale_factor='0.02');

CREATE TABLE public.task_place (
    volume_id integer NOT NULL,
    number bigint NOT NULL,
    task_id uuid NOT NULL,
    place text NOT NULL,
    probability double precision NOT NULL,
    gain double precision NOT NULL,
    minutes double precision NOT NULL,
    point_nm double precision[] NOT NULL,
    said text NOT NULL,
    findings jsonb NOT NULL,
    proposal jsonb,
    made_at timestamp with time zone DEFAULT now() NOT NULL,
    CONSTRAINT task_place_point CHECK ((cardinality(point_nm) = 3)),
    CONSTRAINT task_place_worth CHECK ((((gain >= (0)::double precision) AND (gain <= ('1000000000000000000000000000000000000000000000000000000000000000000000000000000000000000000000000000000000000000000000000000000000000000000000000000000000000000000000000000000000000000000000000000000000000000000000000000000000000000000000000000000000000000000000000000000000000000000000000000000000000'::numeric)::double precision)) AND ((minutes >= (0)::double precision) AND (minutes <= ('1000000000000000000000000000000000000000000000000000000000000000000000000000000000000000000000000000000000000000000000000000000000000000000000000000000000000000000000000000000000000000000000000000000000000000000000000000000000000000000000000000000000000000000000000000000000000000000000000000000000000'::numeric)::double precision)) AND ((probability >= (0)::double precision) AND (probability <= (1)::double precision))))
);

COMMENT ON COLUMN public.task_place.place IS 'triage''s key of the place, the same under changing segment ids';

CREATE TABLE public.token (
    token_id uuid NOT NULL,
    handle text NOT NULL,
    hash bytea NOT NULL,
    note text NOT NULL,
    issued_by text,
    issued_at timestamp with time zone DEFAULT now() NOT NULL,
    last_used timestamp with time zone,
    revoked_at timestamp with time zone,
    revoked_by text,
    CONSTRAINT token_note CHECK ((length(note) <= 200)),
    CONSTRAINT token_revoked CHECK (((revoked_at IS NOT NULL) OR (revoked_by IS NULL))),
    CONSTRAINT token_sha256 CHECK ((octet_length(hash) = 32))
);

COMMENT ON COLUMN public.token.hash IS 'SHA-256 of the secret; the secret itself has 256 random bits, so that no salt is needed, and is not stored';

COMMENT ON COLUMN public.token.issued_by IS 'null: the operator of the machine; likewise revoked_by';

CREATE TABLE public.volume (
    volume_id integer NOT NULL,
    name text NOT NULL,
    voxel_nm double precision[] NOT NULL,
    bounds_nm double precision[] NOT NULL,
    seams jsonb NOT NULL,
    gaps jsonb NOT NULL,
    supervoxels bigint NOT NULL,
    segments bigint NOT NULL,
    contacts bigint NOT NULL,
    rejected bigint NOT NULL,
    assumed bigint NOT NULL,
    synapses bigint NOT NULL,
    nuclei bigint NOT NULL,
    truth bigint NOT NULL,
    has_truth boolean NOT NULL,
    digest bytea NOT NULL,
    mint_from bigint NOT NULL,
    layout integer NOT NULL,
    imported_at timestamp with time zone DEFAULT now() NOT NULL,
    CONSTRAINT volume_bounds CHECK ((cardinality(bounds_nm) = 6)),
    CONSTRAINT volume_counts CHECK (((supervoxels > 0) AND (segments > 0) AND (contacts >= 0) AND (rejected >= 0) AND (assumed >= 0) AND (synapses >= 0) AND (nuclei >= 0) AND (truth >= 0))),
    CONSTRAINT volume_digest CHECK ((octet_length(digest) = 32)),
    CONSTRAINT volume_named CHECK ((name ~ '^[A-Za-z0-9][A-Za-z0-9._-]{0,99}$'::text)),
    CONSTRAINT volume_voxel CHECK ((cardinality(voxel_nm) = 3))
);

COMMENT ON COLUMN public.volume.bounds_nm IS 'smallest x, y, z and largest x, y, z';

COMMENT ON COLUMN public.volume.digest IS 'SHA-256 of the content; two volumes with the same rows have the same digest whatever their names';

COMMENT ON COLUMN public.volume.mint_from IS 'start of a run of 2^32 ids that were not delivered, as the bigint with the same bits';

COMMENT ON COLUMN public.volume.layout IS 'version of the order of ordinals and of the block format';

ALTER TABLE public.volume ALTER COLUMN volume_id ADD GENERATED BY DEFAULT AS IDENTITY (
    SEQUENCE NAME public.volume_volume_id_seq
    START WITH 1
    INCREMENT BY 1
    NO MINVALUE
    NO MAXVALUE
    CACHE 1
);

ALTER TABLE ONLY public.base_block
    ADD CONSTRAINT base_block_pkey PRIMARY KEY (volume_id, section, number);

ALTER TABLE ONLY public.base_nucleus
    ADD CONSTRAINT base_nucleus_pkey PRIMARY KEY (volume_id, nucleus_id);

ALTER TABLE ONLY public.checkpoint_key
    ADD CONSTRAINT checkpoint_key_pkey PRIMARY KEY (volume_id);

ALTER TABLE ONLY public.checkpoint
    ADD CONSTRAINT checkpoint_pkey PRIMARY KEY (volume_id, size);

ALTER TABLE ONLY public.claim
    ADD CONSTRAINT claim_once PRIMARY KEY (claim_id);

ALTER TABLE ONLY public.entry
    ADD CONSTRAINT entry_once UNIQUE (entry_id);

ALTER TABLE ONLY public.entry
    ADD CONSTRAINT entry_pkey PRIMARY KEY (volume_id, "position");

ALTER TABLE ONLY public.finding
    ADD CONSTRAINT finding_pkey PRIMARY KEY (finding_id);

ALTER TABLE ONLY public.follower
    ADD CONSTRAINT follower_pkey PRIMARY KEY (volume_id, name);

ALTER TABLE ONLY public.head
    ADD CONSTRAINT head_pkey PRIMARY KEY (volume_id);

ALTER TABLE ONLY public.lease
    ADD CONSTRAINT lease_one_a_segment PRIMARY KEY (volume_id, segment_id);

ALTER TABLE ONLY public.neuron
    ADD CONSTRAINT neuron_anchor UNIQUE (volume_id, anchor);

ALTER TABLE ONLY public.neuron
    ADD CONSTRAINT neuron_pkey PRIMARY KEY (volume_id, name);

ALTER TABLE ONLY public.person
    ADD CONSTRAINT person_pkey PRIMARY KEY (handle);

ALTER TABLE ONLY public.piece
    ADD CONSTRAINT piece_one_group EXCLUDE USING gist (int8range((((volume_id)::bigint << 32) + lo), (((volume_id)::bigint << 32) + hi)) WITH &&, int8range(from_position, to_position) WITH &&);

ALTER TABLE ONLY public.piece
    ADD CONSTRAINT piece_pkey PRIMARY KEY (volume_id, lo, from_position);

ALTER TABLE ONLY public.review
    ADD CONSTRAINT review_pkey PRIMARY KEY (claim_id);

ALTER TABLE ONLY public.schema_done
    ADD CONSTRAINT schema_done_pkey PRIMARY KEY (version);

ALTER TABLE ONLY public.schema_migrations
    ADD CONSTRAINT schema_migrations_pkey PRIMARY KEY (version);

ALTER TABLE ONLY public.segment
    ADD CONSTRAINT segment_pkey PRIMARY KEY (volume_id, segment_id);

ALTER TABLE ONLY public.task_event
    ADD CONSTRAINT task_event_pkey PRIMARY KEY (volume_id, number, event);

ALTER TABLE ONLY public.task_key
    ADD CONSTRAINT task_one_a_place PRIMARY KEY (volume_id, key);

ALTER TABLE ONLY public.task
    ADD CONSTRAINT task_pkey PRIMARY KEY (volume_id, number);

ALTER TABLE ONLY public.task_place
    ADD CONSTRAINT task_place_id UNIQUE (task_id);

ALTER TABLE ONLY public.task_place
    ADD CONSTRAINT task_place_pkey PRIMARY KEY (volume_id, number);

ALTER TABLE ONLY public.token
    ADD CONSTRAINT token_hash UNIQUE (hash);

ALTER TABLE ONLY public.token
    ADD CONSTRAINT token_pkey PRIMARY KEY (token_id);

ALTER TABLE ONLY public.volume
    ADD CONSTRAINT volume_name UNIQUE (name);

ALTER TABLE ONLY public.volume
    ADD CONSTRAINT volume_pkey PRIMARY KEY (volume_id);

CREATE INDEX base_nucleus_supervoxel ON public.base_nucleus USING btree (volume_id, supervoxel);

CREATE INDEX base_synapse_post ON public.base_synapse USING btree (volume_id, post);

CREATE INDEX base_synapse_pre ON public.base_synapse USING btree (volume_id, pre);

CREATE INDEX claim_by_end ON public.claim USING btree (volume_id, ended_at) WHERE (ended IS NOT NULL);

CREATE UNIQUE INDEX claim_one_a_person ON public.claim USING btree (volume_id, person) WHERE (ended IS NULL);

CREATE UNIQUE INDEX claim_one_a_task ON public.claim USING btree (volume_id, number) WHERE (ended IS NULL);

CREATE UNIQUE INDEX claim_one_an_entry ON public.claim USING btree (volume_id, "position") WHERE ("position" IS NOT NULL);

CREATE INDEX entry_by_person ON public.entry USING btree (volume_id, person, "position");

CREATE INDEX entry_by_task ON public.entry USING btree (task_id) WHERE (task_id IS NOT NULL);

CREATE INDEX entry_by_time ON public.entry USING brin (posted_at);

CREATE UNIQUE INDEX entry_reversed_once ON public.entry USING btree (volume_id, reverses) WHERE (reverses IS NOT NULL);

CREATE INDEX finding_by_gain ON public.finding USING btree (volume_id, gain DESC, finding_id) WHERE (retired IS NULL);

CREATE INDEX finding_by_segment ON public.finding USING gin (segments) WHERE (retired IS NULL);

CREATE UNIQUE INDEX finding_once ON public.finding USING btree (volume_id, detector, place) WHERE (retired IS NULL);

CREATE INDEX piece_by_from ON public.piece USING brin (from_position);

CREATE INDEX piece_by_to ON public.piece USING brin (to_position);

CREATE UNIQUE INDEX segment_of_group ON public.segment USING btree (volume_id, grp, born);

CREATE INDEX task_assigned ON public.task USING btree (volume_id, assigned_to, priority DESC, number) WHERE (((state)::text = 'open'::text) AND (assigned_to IS NOT NULL));

CREATE INDEX task_key_by_task ON public.task_key USING btree (volume_id, number);

CREATE UNIQUE INDEX task_line_order ON public.task_line USING btree (volume_id, segment_id, priority DESC, number);

CREATE INDEX task_ready ON public.task USING btree (volume_id, priority DESC, number) WHERE (((state)::text = 'open'::text) AND head);

CREATE INDEX task_to_review ON public.task USING btree (volume_id, number) WHERE ((state)::text = 'resolved'::text);

CREATE INDEX token_by_handle ON public.token USING btree (handle, issued_at);

CREATE TRIGGER base_is_final BEFORE DELETE OR UPDATE OR TRUNCATE ON public.base_block FOR EACH STATEMENT EXECUTE FUNCTION public.base_is_final();

CREATE TRIGGER base_is_final BEFORE DELETE OR UPDATE OR TRUNCATE ON public.base_nucleus FOR EACH STATEMENT EXECUTE FUNCTION public.base_is_final();

CREATE TRIGGER base_is_final BEFORE DELETE OR UPDATE OR TRUNCATE ON public.base_synapse FOR EACH STATEMENT EXECUTE FUNCTION public.base_is_final();

CREATE TRIGGER base_is_final BEFORE DELETE OR UPDATE OR TRUNCATE ON public.volume FOR EACH STATEMENT EXECUTE FUNCTION public.base_is_final();

CREATE TRIGGER checkpoint_is_final BEFORE DELETE OR UPDATE OR TRUNCATE ON public.checkpoint FOR EACH STATEMENT EXECUTE FUNCTION public.checkpoint_is_final();

CREATE TRIGGER checkpoint_is_final BEFORE DELETE OR UPDATE OR TRUNCATE ON public.checkpoint_key FOR EACH STATEMENT EXECUTE FUNCTION public.checkpoint_is_final();

CREATE TRIGGER claim_is_live BEFORE UPDATE ON public.claim FOR EACH ROW WHEN ((old.ended IS NOT NULL)) EXECUTE FUNCTION public.claim_is_live();

CREATE TRIGGER entry_gapless AFTER INSERT ON public.entry REFERENCING NEW TABLE AS added FOR EACH STATEMENT EXECUTE FUNCTION public.entry_gapless();

CREATE TRIGGER entry_is_final BEFORE DELETE OR UPDATE OR TRUNCATE ON public.entry FOR EACH STATEMENT EXECUTE FUNCTION public.entry_is_final();

CREATE TRIGGER history_is_final BEFORE DELETE OR TRUNCATE ON public.claim FOR EACH STATEMENT EXECUTE FUNCTION public.history_is_final();

CREATE TRIGGER history_is_final BEFORE DELETE OR UPDATE OR TRUNCATE ON public.review FOR EACH STATEMENT EXECUTE FUNCTION public.history_is_final();

CREATE TRIGGER history_is_final BEFORE DELETE OR TRUNCATE ON public.task FOR EACH STATEMENT EXECUTE FUNCTION public.history_is_final();

CREATE TRIGGER history_is_final BEFORE DELETE OR UPDATE OR TRUNCATE ON public.task_event FOR EACH STATEMENT EXECUTE FUNCTION public.history_is_final();

CREATE TRIGGER person_stays BEFORE DELETE OR TRUNCATE ON public.person FOR EACH STATEMENT EXECUTE FUNCTION public.person_stays();

CREATE TRIGGER review_fits BEFORE INSERT ON public.review FOR EACH ROW EXECUTE FUNCTION public.review_fits();

CREATE TRIGGER task_starts BEFORE INSERT ON public.task FOR EACH ROW WHEN (((new.state)::text <> 'open'::text)) EXECUTE FUNCTION public.task_starts();

CREATE TRIGGER task_step BEFORE UPDATE OF state ON public.task FOR EACH ROW WHEN (((old.state)::text <> (new.state)::text)) EXECUTE FUNCTION public.task_step();

ALTER TABLE ONLY public.base_block
    ADD CONSTRAINT base_block_volume FOREIGN KEY (volume_id) REFERENCES public.volume(volume_id) DEFERRABLE INITIALLY DEFERRED;

ALTER TABLE ONLY public.checkpoint_key
    ADD CONSTRAINT checkpoint_key_volume_id_fkey FOREIGN KEY (volume_id) REFERENCES public.volume(volume_id);

ALTER TABLE ONLY public.checkpoint
    ADD CONSTRAINT checkpoint_volume_id_fkey FOREIGN KEY (volume_id) REFERENCES public.volume(volume_id);

ALTER TABLE ONLY public.claim
    ADD CONSTRAINT claim_entry FOREIGN KEY (volume_id, "position") REFERENCES public.entry(volume_id, "position");

ALTER TABLE ONLY public.claim
    ADD CONSTRAINT claim_person_fkey FOREIGN KEY (person) REFERENCES public.person(handle);

ALTER TABLE ONLY public.claim
    ADD CONSTRAINT claim_task FOREIGN KEY (volume_id, number) REFERENCES public.task(volume_id, number);

ALTER TABLE ONLY public.finding
    ADD CONSTRAINT finding_volume_id_fkey FOREIGN KEY (volume_id) REFERENCES public.volume(volume_id);

ALTER TABLE ONLY public.follower
    ADD CONSTRAINT follower_volume_id_fkey FOREIGN KEY (volume_id) REFERENCES public.volume(volume_id);

ALTER TABLE ONLY public.head
    ADD CONSTRAINT head_volume_id_fkey FOREIGN KEY (volume_id) REFERENCES public.volume(volume_id);

ALTER TABLE ONLY public.neuron
    ADD CONSTRAINT neuron_volume_id_fkey FOREIGN KEY (volume_id) REFERENCES public.volume(volume_id);

ALTER TABLE ONLY public.person
    ADD CONSTRAINT person_added_by_fkey FOREIGN KEY (added_by) REFERENCES public.person(handle);

ALTER TABLE ONLY public.review
    ADD CONSTRAINT review_claim_id_fkey FOREIGN KEY (claim_id) REFERENCES public.claim(claim_id);

ALTER TABLE ONLY public.review
    ADD CONSTRAINT review_entry FOREIGN KEY (volume_id, "position") REFERENCES public.entry(volume_id, "position");

ALTER TABLE ONLY public.review
    ADD CONSTRAINT review_person_fkey FOREIGN KEY (person) REFERENCES public.person(handle);

ALTER TABLE ONLY public.review
    ADD CONSTRAINT review_volume_id_fkey FOREIGN KEY (volume_id) REFERENCES public.volume(volume_id);

ALTER TABLE ONLY public.task
    ADD CONSTRAINT task_assigned_to_fkey FOREIGN KEY (assigned_to) REFERENCES public.person(handle);

ALTER TABLE ONLY public.task_place
    ADD CONSTRAINT task_place_task FOREIGN KEY (volume_id, number) REFERENCES public.task(volume_id, number);

ALTER TABLE ONLY public.task
    ADD CONSTRAINT task_volume_id_fkey FOREIGN KEY (volume_id) REFERENCES public.volume(volume_id);

ALTER TABLE ONLY public.token
    ADD CONSTRAINT token_handle_fkey FOREIGN KEY (handle) REFERENCES public.person(handle);

ALTER TABLE ONLY public.token
    ADD CONSTRAINT token_issued_by_fkey FOREIGN KEY (issued_by) REFERENCES public.person(handle);

ALTER TABLE ONLY public.token
    ADD CONSTRAINT token_revoked_by_fkey FOREIGN KEY (revoked_by) REFERENCES public.person(handle);
