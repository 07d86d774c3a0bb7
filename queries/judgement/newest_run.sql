-- The newest judgement.
-- out: every column of runs, at most one row
select * from runs order by run_id desc limit 1
