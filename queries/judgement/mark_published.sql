-- Notes where the report of a judgement was published.
-- in:  $run_id integer, $folder varchar, $published_at timestamp (UTC)
update runs set folder = $folder, published_at = $published_at where run_id = $run_id
