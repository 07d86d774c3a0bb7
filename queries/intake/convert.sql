-- Rows of the staging table `raw` with their typed time and value, or the reason why they are set aside.
-- in:  $zone (of times without offset), $format (strptime, or null for ISO 8601), $decimal, $thousands,
--      $earliest, $latest timestamp (UTC), $empty_is_error boolean
-- out: temp table `typed`: n, name, taken_at, value, the labels, disposition, reason, column_name, bad
-- why text first: a typed read turns NaN, inf and 1_000 into numbers and drops offsets without a word (store study, 1.3)
create or replace temp table typed as
with trimmed as (
    select
        n, trim(characteristic) as name, trim(taken_at) as t, trim(value) as v,
        nullif(trim(subgroup), '') as subgroup, nullif(trim(stream), '') as stream, nullif(trim(part_id), '') as part_id,
        nullif(trim(lot), '') as lot, nullif(trim(unit), '') as unit, nullif(trim(measurement_id), '') as measurement_id,
        nullif(lower(trim(disposition)), '') as fate
    from raw
),
plain as (
    select
        *,
        case
            when contains(v, '_') then null
            when $thousands <> '' and contains(v, $thousands) then
                -- Thousands signs must part groups of three digits, or a point would turn 1.23 into 123.
                case
                    when regexp_full_match(
                        replace(replace(v, $thousands, '#'), $decimal, '~'), '[+-]?\d{1,3}(#\d{3})+(~\d*)?'
                    ) then replace(replace(v, $thousands, ''), $decimal, '.')
                end
            when $decimal = ',' then case when not contains(v, '.') then replace(v, ',', '.') end
            else v
        end as number,
        length(t) > 10 and (
            contains(substr(t, 11), '+') or contains(substr(t, 11), '-') or ends_with(upper(t), 'Z')
        ) as has_offset
    from trimmed
),
cast_rows as (
    select
        *,
        try_cast(number as double) as value,
        case
            when $format is not null then try_strptime(t, $format)::timestamp
            when has_offset then timezone('UTC', try_cast(t as timestamptz))
            else try_cast(t as timestamp)
        end as stated
    from plain
),
placed as (
    select
        * exclude (stated),
        case
            when has_offset and $format is null then stated
            when stated is null or not isfinite(stated) or year(stated) not between 1900 and 2200 then null
            when $zone = 'UTC' then stated
            else timezone('UTC', timezone($zone, stated))
        end as taken_at,
        -- The hour that the clock skips in spring exists nowhere; it maps to an hour of another name.
        case
            when $zone = 'UTC' or (has_offset and $format is null) or stated is null or not isfinite(stated) then false
            else timezone($zone, timezone($zone, stated)) <> stated
        end as skipped_hour,
        case
            when $zone = 'UTC' or (has_offset and $format is null) or stated is null or not isfinite(stated) then false
            else timezone($zone, timezone($zone, stated) - interval 1 hour) = stated
                or timezone($zone, timezone($zone, stated) + interval 1 hour) = stated
        end as doubled_hour
    from cast_rows
),
judged as (
    select
        placed.*,
        case
            when fate is null then 0
            when fate in ('accepted', 'accept', 'ok', 'pass', 'passed', '1', 'good', 'i.o.', 'io') then 1
            when fate in ('rejected', 'reject', 'nok', 'fail', 'failed', '0', 'bad', 'n.i.o.', 'nio', 'scrap') then 2
            else 9
        end as disposition,
        case
            when name is null or name = '' then 'empty name|characteristic'
            when t is null or t = '' then 'empty time|taken_at'
            when v is null or v = '' then case when $empty_is_error then 'empty value|value' else 'not measured|value' end
            when value is null then 'not a number|value'
            when not isfinite(value) then 'not finite|value'
            when skipped_hour then 'time does not exist|taken_at'
            when taken_at is null then 'not a time|taken_at'
            when taken_at < $earliest then 'time out of range|taken_at'
            when taken_at > $latest then 'time in the future|taken_at'
            when disposition = 9 then 'unknown disposition|disposition'
            when placed.unit is not null and registered.unit <> '' and placed.unit <> registered.unit then 'unit differs from the registry|unit'
        end as verdict
    from placed
    left join registered using (name)
)
select
    n, name, taken_at, value, subgroup, stream, part_id, lot, unit, measurement_id,
    nullif(disposition, 0) as disposition, doubled_hour,
    split_part(verdict, '|', 1) as reason, split_part(verdict, '|', 2) as column_name,
    case
        when verdict is not null then concat_ws('; ', name, t, v, unit, fate)
    end as bad
from judged
