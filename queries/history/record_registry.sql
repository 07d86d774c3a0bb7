-- Records a new version of the registry.
-- in:  $sha256 varchar, $recorded_at timestamp (UTC), $rows_json varchar
insert into registry_versions
select coalesce(max(version), 0) + 1, $sha256, $recorded_at, $rows_json from registry_versions
