-- The load that brought exactly this content, under whatever name.
-- in: $source, $sha256
select item, rows_new + rows_known + rows_corrected as rows from loads
where source = $source and sha256 = $sha256 and status = 'done'
order by load_id
limit 1
