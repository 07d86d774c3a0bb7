-- The registry version with this content, if it is known.
-- in:  $sha256 varchar
-- out: version
select version from registry_versions where sha256 = $sha256
