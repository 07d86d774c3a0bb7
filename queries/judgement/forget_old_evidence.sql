-- Drops the chart data of all but the newest judgements; their verdicts stay.
-- in:  $keep integer
delete from evidence where run_id not in (select run_id from runs order by run_id desc limit $keep)
