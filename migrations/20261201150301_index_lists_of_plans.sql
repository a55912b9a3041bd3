-- A plan's inputs are some ten kilobytes in the middle of its row. Lists find and sort their
-- plans in these alone, and then read only the rows they show.

CREATE INDEX plans_by_day ON plans (brewed_on, id, state, beer_id, batch);
CREATE INDEX plans_by_batch ON plans (batch, id, state, beer_id);
CREATE INDEX plans_by_beer_name ON plans (beer_name, id, state, beer_id, batch);
DROP INDEX plans_by_state;
CREATE INDEX plans_by_state ON plans (state, brewed_on, id, beer_id, batch);
