-- SPDX-License-Identifier: GPL-3.0-or-later
-- Catalog format 1: mechanisms, their immutable revisions, what happened to them, and prepared
-- solution sets.
--
-- Rules of this room:
--  * STRICT tables. Every number has two-sided bounds, every text a bounded length in bytes. There
--    are no REAL columns; one added later needs NOT NULL and CHECK (abs(x) < 1e300), because STRICT
--    lets infinity through and stores NaN as NULL.
--  * A revision and an event are written once. The triggers below refuse UPDATE and DELETE, and the
--    replacing form of INSERT, also for other tools that open this file.
--  * The state of a revision is not stored: it follows from its events (the views at the end), so
--    the two can never disagree.
--  * A migration is never edited once released; the next change is 0002_*.sql. Rows about requests
--    (an audit) will be a table of their own there and touch nothing here.
--
-- Times are milliseconds since 1970-01-01 UTC, from 0 to the end of the year 9999.
-- The bounds repeat those of catalog.h; a test holds the two together.

CREATE TABLE mechanism (
    id          INTEGER PRIMARY KEY CHECK (id > 0),
    name        TEXT    NOT NULL UNIQUE
                CHECK (length(CAST(name AS BLOB)) BETWEEN 1 AND 32
                       AND name NOT GLOB '*[^a-z0-9-]*'),
    created_ms  INTEGER NOT NULL CHECK (created_ms BETWEEN 0 AND 253402300799999)
) STRICT;

-- The long texts stand last, so that listing never reads their overflow pages.
CREATE TABLE revision (
    id            INTEGER PRIMARY KEY CHECK (id > 0),
    mechanism_id  INTEGER NOT NULL REFERENCES mechanism (id),
    number        INTEGER NOT NULL CHECK (number BETWEEN 1 AND 10000),
    digest        TEXT    NOT NULL
                  CHECK (length(CAST(digest AS BLOB)) = 64 AND digest NOT GLOB '*[^0-9a-f]*'),
    created_ms    INTEGER NOT NULL CHECK (created_ms BETWEEN 0 AND 253402300799999),
    created_by    TEXT    NOT NULL CHECK (length(CAST(created_by AS BLOB)) BETWEEN 1 AND 64),
    checksum      INTEGER NOT NULL, -- CRC-64 over document, then report: finds damage on the disk
    report        TEXT    NOT NULL CHECK (length(CAST(report AS BLOB)) <= 1048576),
    document      TEXT    NOT NULL CHECK (length(CAST(document AS BLOB)) BETWEEN 1 AND 4194304),
    UNIQUE (mechanism_id, number)
) STRICT;

CREATE INDEX revision_by_digest ON revision (mechanism_id, digest, number);

-- serial counts the events of one mechanism from 1: it is the tag a client compares and sets.
CREATE TABLE state_event (
    id            INTEGER PRIMARY KEY CHECK (id > 0),
    mechanism_id  INTEGER NOT NULL,
    serial        INTEGER NOT NULL CHECK (serial BETWEEN 1 AND 1000000000),
    number        INTEGER NOT NULL CHECK (number BETWEEN 1 AND 10000),
    action        TEXT    NOT NULL CHECK (action IN ('publish', 'withdraw')),
    at_ms         INTEGER NOT NULL CHECK (at_ms BETWEEN 0 AND 253402300799999),
    who           TEXT    NOT NULL CHECK (length(CAST(who AS BLOB)) BETWEEN 1 AND 64),
    reason        TEXT    NOT NULL CHECK (length(CAST(reason AS BLOB)) <= 511),
    accepted      TEXT    NOT NULL CHECK (length(CAST(accepted AS BLOB)) <= 1023),
    UNIQUE (mechanism_id, serial),
    FOREIGN KEY (mechanism_id, number) REFERENCES revision (mechanism_id, number)
) STRICT;

CREATE INDEX state_event_by_revision ON state_event (mechanism_id, number, action);
CREATE INDEX state_event_by_action ON state_event (mechanism_id, action, serial, number);

-- Derived data: it can be computed again from the document, so it may be replaced and deleted.
CREATE TABLE solution_set (
    mechanism_id  INTEGER NOT NULL,
    number        INTEGER NOT NULL CHECK (number BETWEEN 1 AND 10000),
    created_ms    INTEGER NOT NULL CHECK (created_ms BETWEEN 0 AND 253402300799999),
    checksum      INTEGER NOT NULL, -- CRC-64 over content
    content       BLOB    NOT NULL CHECK (length(content) BETWEEN 1 AND 16777216),
    PRIMARY KEY (mechanism_id, number),
    FOREIGN KEY (mechanism_id, number) REFERENCES revision (mechanism_id, number)
) STRICT;

CREATE TRIGGER mechanism_is_kept BEFORE DELETE ON mechanism
BEGIN SELECT RAISE(ABORT, 'a mechanism is never deleted'); END;
CREATE TRIGGER mechanism_is_fixed BEFORE UPDATE ON mechanism
BEGIN SELECT RAISE(ABORT, 'a mechanism is never changed'); END;
CREATE TRIGGER mechanism_is_not_replaced BEFORE INSERT ON mechanism
WHEN EXISTS (SELECT 1 FROM mechanism WHERE id = NEW.id OR name = NEW.name)
BEGIN SELECT RAISE(ABORT, 'a mechanism is never replaced'); END;

CREATE TRIGGER revision_is_kept BEFORE DELETE ON revision
BEGIN SELECT RAISE(ABORT, 'a revision is never deleted'); END;
CREATE TRIGGER revision_is_fixed BEFORE UPDATE ON revision
BEGIN SELECT RAISE(ABORT, 'a revision is never changed'); END;
CREATE TRIGGER revision_is_not_replaced BEFORE INSERT ON revision
WHEN EXISTS (SELECT 1 FROM revision WHERE id = NEW.id)
BEGIN SELECT RAISE(ABORT, 'a revision is never replaced'); END;
CREATE TRIGGER revision_is_next BEFORE INSERT ON revision
WHEN NEW.number <> 1 + (SELECT COALESCE(MAX(number), 0) FROM revision
                        WHERE mechanism_id = NEW.mechanism_id)
BEGIN SELECT RAISE(ABORT, 'revision numbers have no gaps'); END;
CREATE TRIGGER revision_is_new BEFORE INSERT ON revision
WHEN EXISTS (SELECT 1 FROM revision r
             WHERE r.mechanism_id = NEW.mechanism_id AND r.digest = NEW.digest
               AND NOT EXISTS (SELECT 1 FROM state_event w
                               WHERE w.mechanism_id = r.mechanism_id AND w.number = r.number
                                 AND w.action = 'withdraw'))
BEGIN SELECT RAISE(ABORT, 'this content is a revision already'); END;

CREATE TRIGGER state_event_is_kept BEFORE DELETE ON state_event
BEGIN SELECT RAISE(ABORT, 'an event is never deleted'); END;
CREATE TRIGGER state_event_is_fixed BEFORE UPDATE ON state_event
BEGIN SELECT RAISE(ABORT, 'an event is never changed'); END;
CREATE TRIGGER state_event_is_not_replaced BEFORE INSERT ON state_event
WHEN EXISTS (SELECT 1 FROM state_event WHERE id = NEW.id)
BEGIN SELECT RAISE(ABORT, 'an event is never replaced'); END;
CREATE TRIGGER state_event_is_next BEFORE INSERT ON state_event
WHEN NEW.serial <> 1 + (SELECT COALESCE(MAX(serial), 0) FROM state_event
                        WHERE mechanism_id = NEW.mechanism_id)
BEGIN SELECT RAISE(ABORT, 'event serials have no gaps'); END;
CREATE TRIGGER state_event_after_withdrawal BEFORE INSERT ON state_event
WHEN EXISTS (SELECT 1 FROM state_event
             WHERE mechanism_id = NEW.mechanism_id AND number = NEW.number
               AND action = 'withdraw')
BEGIN SELECT RAISE(ABORT, 'nothing happens to a withdrawn revision'); END;

-- state: 0 draft, 1 published, 2 withdrawn (the order of lwd_catalog_state).
CREATE VIEW revision_state AS
SELECT r.id, r.mechanism_id, r.number,
       CASE WHEN EXISTS (SELECT 1 FROM state_event e WHERE e.mechanism_id = r.mechanism_id
                           AND e.number = r.number AND e.action = 'withdraw') THEN 2
            WHEN EXISTS (SELECT 1 FROM state_event e WHERE e.mechanism_id = r.mechanism_id
                           AND e.number = r.number AND e.action = 'publish') THEN 1
            ELSE 0 END AS state
FROM revision r;

-- answering: the revision published last, 0 if none was or if that one has been withdrawn since.
-- Withdrawing never lets an older revision answer by itself: somebody has to publish it.
CREATE VIEW mechanism_state AS
SELECT m.id, m.name, m.created_ms,
       (SELECT COALESCE(MAX(e.serial), 0) FROM state_event e
        WHERE e.mechanism_id = m.id) AS tag,
       (SELECT COALESCE(MAX(r.number), 0) FROM revision r WHERE r.mechanism_id = m.id) AS latest,
       COALESCE((SELECT p.number FROM state_event p
                 WHERE p.mechanism_id = m.id AND p.action = 'publish'
                   AND p.serial = (SELECT MAX(l.serial) FROM state_event l
                                   WHERE l.mechanism_id = m.id AND l.action = 'publish')
                   AND NOT EXISTS (SELECT 1 FROM state_event w
                                   WHERE w.mechanism_id = m.id AND w.number = p.number
                                     AND w.action = 'withdraw')), 0) AS answering,
       (SELECT COUNT(*) FROM state_event e
        WHERE e.mechanism_id = m.id AND e.action = 'withdraw') AS withdrawn,
       (SELECT COUNT(DISTINCT p.number) FROM state_event p
        WHERE p.mechanism_id = m.id AND p.action = 'publish'
          AND NOT EXISTS (SELECT 1 FROM state_event w
                          WHERE w.mechanism_id = m.id AND w.number = p.number
                            AND w.action = 'withdraw')) AS published
FROM mechanism m;
