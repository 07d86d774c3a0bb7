-- Logged changes, newest first.
select change_id, characteristic, changed_at, kind, note, logged_at, logged_by from changes order by changed_at desc, change_id desc
