-- Records a change made to a process; the same change told twice is one change.
-- in:  $characteristic, $changed_at timestamp (UTC), $kind, $note, $logged_at timestamp (UTC), $logged_by
insert into changes
select coalesce(max(change_id), 0) + 1, $characteristic, $changed_at, $kind, $note, $logged_at, $logged_by
from changes
having count(*) filter (where characteristic = $characteristic and changed_at = $changed_at and kind = $kind) = 0
