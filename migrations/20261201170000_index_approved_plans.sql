-- Stock counts every dose of an approved plan that no approved plan took the place of.
-- Both questions are answered from an index: a row of a plan is tens of kilobytes, and its
-- day of approval stands behind its inputs.
CREATE INDEX plans_approved ON plans (id, approved_at, batch);
CREATE INDEX plans_that_replaced ON plans (replaces, approved_at) WHERE replaces IS NOT NULL;
