-- The good rows in the store's form, one a key: the last of equal keys inside one item wins.
-- The key of a measurement inside (characteristic, time): its own number where the source gives one, else the part
-- (and stream), else its position among the values of that characteristic, time and stream.
create or replace temp table batch as
select
    characteristic_id, taken_at, unit_no, value, subgroup_no, stream_no, lot_no, unit_label, disposition
from (
    select
        c.characteristic_id, t.taken_at, t.value, t.n, t.disposition::utinyint as disposition,
        s.label_id as subgroup_no, m.label_id as stream_no, l.label_id as lot_no, u.label_id as unit_label,
        case
            when t.measurement_id is not null then hash('id', t.measurement_id)
            when t.part_id is not null then hash('part', t.part_id, coalesce(t.stream, ''))
            else hash(
                'place',
                row_number() over (partition by c.characteristic_id, t.taken_at, t.stream order by t.n),
                coalesce(t.stream, '')
            )
        end as unit_no
    from typed as t
    join characteristics as c using (name)
    left join labels as s on s.label = t.subgroup
    left join labels as m on m.label = t.stream
    left join labels as l on l.label = t.lot
    left join labels as u on u.label = t.unit
    where t.reason is null
)
qualify row_number() over (partition by characteristic_id, taken_at, unit_no order by n desc) = 1
