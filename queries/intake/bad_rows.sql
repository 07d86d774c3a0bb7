-- Rows set aside for their content.
-- out: n, column_name, reason, raw
select n, column_name, reason, bad as raw from typed where reason is not null and reason <> 'not measured' order by n
