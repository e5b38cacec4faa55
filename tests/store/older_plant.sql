BEGIN TRANSACTION;
CREATE TABLE extra (
        table_name TEXT NOT NULL, row_key TEXT NOT NULL, column_name TEXT NOT NULL, text TEXT NOT NULL,
        PRIMARY KEY (table_name, row_key, column_name));
CREATE TABLE journal (
        id INTEGER NOT NULL PRIMARY KEY, at TEXT NOT NULL, who TEXT NOT NULL, what TEXT NOT NULL,
        changes TEXT NOT NULL, why TEXT NOT NULL, undoes INTEGER REFERENCES journal (id),
        prev_hash TEXT NOT NULL, hash TEXT NOT NULL);
INSERT INTO "journal" VALUES(1,'2026-12-01T13:43:08.594Z','anna','imported small','[{"after":{"api_group":"","blend_kv100":null,"blend_kv40":null,"density15":null,"kind":"base","kv100":5.23,"kv40":30.2,"name":"","oil":"","position":1,"price_per_t":820.0,"retired":0,"source":"","tested_on":"","unpumpable_kg":null},"before":null,"key":{"stock":"A"},"table":"stock"},{"after":{"api_group":"","blend_kv100":null,"blend_kv40":null,"density15":null,"kind":"base","kv100":10.9,"kv40":98.5,"name":"","oil":"","position":2,"price_per_t":870.0,"retired":0,"source":"","tested_on":"","unpumpable_kg":null},"before":null,"key":{"stock":"B"},"table":"stock"},{"after":{"value":214.0},"before":null,"key":{"property":"flash","stock":"A"},"table":"stock_value"},{"after":{"mg":40000000000},"before":null,"key":{"stock":"A"},"table":"quantity"},{"after":{"mg":35000000000},"before":null,"key":{"stock":"B"},"table":"quantity"},{"after":{"batch_kg":null,"grade":"ISO VG 46","law":"","max_cost_per_t":null,"max_stocks":null,"min_share_pct":null,"name":"","note":"","only_listed":0,"position":1,"retired":0},"before":null,"key":{"product":"P46"},"table":"product"}]','',NULL,'0000000000000000000000000000000000000000000000000000000000000000','2e8556c1017caddcf81a361a700e312dc3f1e372c96e0dab2c775c44f2394833');
INSERT INTO "journal" VALUES(2,'2026-12-01T13:43:08.598Z','anna','A price 820 → 800','[{"after":{"price_per_t":800.0},"before":{"price_per_t":820.0},"key":{"stock":"A"},"table":"stock"}]','',NULL,'2e8556c1017caddcf81a361a700e312dc3f1e372c96e0dab2c775c44f2394833','39120f59eeb4b41e93ecf38d8b741890ccfe9b2f4f99aa4a17c8ee422eb8364a');
INSERT INTO "journal" VALUES(3,'2026-12-01T13:43:08.599Z','anna','C added','[{"after":{"api_group":"","blend_kv100":null,"blend_kv40":null,"density15":null,"kind":"base","kv100":6.8,"kv40":46.0,"name":"","oil":"","position":3,"price_per_t":null,"retired":0,"source":"","tested_on":"","unpumpable_kg":null},"before":null,"key":{"stock":"C"},"table":"stock"}]','',NULL,'39120f59eeb4b41e93ecf38d8b741890ccfe9b2f4f99aa4a17c8ee422eb8364a','a272717c99b8d4ec393d46d31ecea9504af64d0113dae532126a9678db247102');
CREATE TABLE movement (
        id INTEGER NOT NULL PRIMARY KEY, stock TEXT NOT NULL, mg INTEGER, reason TEXT NOT NULL,
        journal INTEGER NOT NULL REFERENCES journal (id));
INSERT INTO "movement" VALUES(1,'A',40000000000,'imported small',1);
INSERT INTO "movement" VALUES(2,'B',35000000000,'imported small',1);
CREATE TABLE product (
        product TEXT NOT NULL PRIMARY KEY, name TEXT NOT NULL, grade TEXT NOT NULL, batch_kg REAL,
        law TEXT NOT NULL, max_cost_per_t REAL, max_stocks INTEGER, min_share_pct REAL,
        only_listed INTEGER NOT NULL, note TEXT NOT NULL, position INTEGER NOT NULL,
        retired INTEGER NOT NULL);
INSERT INTO "product" VALUES('P46','','ISO VG 46',NULL,'',NULL,NULL,NULL,0,'',1,0);
CREATE TABLE product_limit (
        product TEXT NOT NULL REFERENCES product (product), property TEXT NOT NULL, line INTEGER NOT NULL,
        low REAL, high REAL, guard REAL NOT NULL, guard_pct REAL NOT NULL, unknown_ok INTEGER NOT NULL,
        position INTEGER NOT NULL, PRIMARY KEY (product, property, line));
CREATE TABLE share_rule (
        product TEXT NOT NULL REFERENCES product (product), of_name TEXT NOT NULL, line INTEGER NOT NULL,
        low_pct REAL NOT NULL, high_pct REAL NOT NULL, position INTEGER NOT NULL,
        PRIMARY KEY (product, of_name, line));
CREATE TABLE stock (
        stock TEXT NOT NULL PRIMARY KEY, name TEXT NOT NULL, oil TEXT NOT NULL, kind TEXT NOT NULL,
        api_group TEXT NOT NULL, unpumpable_kg REAL, price_per_t REAL, density15 REAL, kv40 REAL, kv100 REAL,
        blend_kv40 REAL, blend_kv100 REAL, tested_on TEXT NOT NULL, source TEXT NOT NULL,
        position INTEGER NOT NULL, retired INTEGER NOT NULL);
INSERT INTO "stock" VALUES('A','','','base','',NULL,800.0,NULL,30.2,5.23,NULL,NULL,'','',1,0);
INSERT INTO "stock" VALUES('B','','','base','',NULL,870.0,NULL,98.5,10.9,NULL,NULL,'','',2,0);
INSERT INTO "stock" VALUES('C','','','base','',NULL,NULL,NULL,46.0,6.8,NULL,NULL,'','',3,0);
CREATE TABLE stock_value (
        stock TEXT NOT NULL REFERENCES stock (stock), property TEXT NOT NULL, value REAL NOT NULL,
        PRIMARY KEY (stock, property));
INSERT INTO "stock_value" VALUES('A','flash',214.0);
CREATE TABLE trial (
        product TEXT NOT NULL REFERENCES product (product), trial TEXT NOT NULL, law TEXT NOT NULL,
        note TEXT NOT NULL, kept_at TEXT NOT NULL, kept_by TEXT NOT NULL, PRIMARY KEY (product, trial));
CREATE TABLE trial_share (
        product TEXT NOT NULL, trial TEXT NOT NULL, stock TEXT NOT NULL, share_pct REAL NOT NULL,
        position INTEGER NOT NULL, PRIMARY KEY (product, trial, stock),
        FOREIGN KEY (product, trial) REFERENCES trial (product, trial));
CREATE INDEX journal_who ON journal (who, id);
CREATE INDEX movement_stock ON movement (stock, id);
CREATE TRIGGER journal_no_update BEFORE UPDATE ON journal BEGIN SELECT RAISE(ABORT, 'the journal is append-only'); END;
CREATE TRIGGER journal_no_delete BEFORE DELETE ON journal BEGIN SELECT RAISE(ABORT, 'the journal is append-only'); END;
CREATE TRIGGER movement_no_update BEFORE UPDATE ON movement BEGIN SELECT RAISE(ABORT, 'the movement is append-only'); END;
CREATE TRIGGER movement_no_delete BEFORE DELETE ON movement BEGIN SELECT RAISE(ABORT, 'the movement is append-only'); END;
COMMIT;
