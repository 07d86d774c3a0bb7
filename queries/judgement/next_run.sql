-- The number of the next run and the newest load it can see.
-- out: run_id, max_load_id (null before the first load)
select
    coalesce((select max(run_id) from runs), 0) + 1 as run_id,
    (select max(load_id) from loads where status = 'done') as max_load_id
