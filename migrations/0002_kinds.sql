-- Charts of counts, of run means and of duplicates; standardised tracks; from where on a difference matters.

ALTER TABLE charts DROP CONSTRAINT charts_kind;
ALTER TABLE charts ADD CONSTRAINT charts_kind CHECK (kind BETWEEN 1 AND 10);

-- A chart of numbers nonconforming (kind 6) has the one size of its samples here.
ALTER TABLE charts DROP CONSTRAINT charts_size;
ALTER TABLE charts ADD CONSTRAINT charts_size CHECK (subgroup_size BETWEEN 1 AND CASE kind WHEN 6 THEN 1000000000 ELSE 100 END);

ALTER TABLE charts ADD COLUMN standardised boolean NOT NULL DEFAULT false;
ALTER TABLE charts ADD COLUMN relevant_shift_sigmas double precision NOT NULL DEFAULT 0
  CONSTRAINT charts_relevant_shift CHECK (relevant_shift_sigmas BETWEEN 0 AND 5);
ALTER TABLE charts ADD COLUMN relevant_sigma_ratio double precision NOT NULL DEFAULT 0
  CONSTRAINT charts_relevant_ratio CHECK (relevant_sigma_ratio BETWEEN 0 AND 10);
