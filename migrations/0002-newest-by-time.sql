-- Databases can be merged: the newest analysis of a cooldown is the one made last, not the one stored last.
DROP VIEW newest_analysis;
CREATE VIEW newest_analysis AS
  SELECT a.id, a.cooldown_id FROM analysis a
  WHERE NOT EXISTS (SELECT 1 FROM analysis b WHERE b.cooldown_id = a.cooldown_id AND (b.made_at, b.id) > (a.made_at, a.id));
