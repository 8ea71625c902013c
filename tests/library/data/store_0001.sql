BEGIN TRANSACTION;
CREATE TABLE alembic_version (
	version_num VARCHAR(32) NOT NULL, 
	CONSTRAINT alembic_version_pkc PRIMARY KEY (version_num)
);
INSERT INTO "alembic_version" VALUES('0001');
CREATE TABLE alias (
	alias_key TEXT NOT NULL, 
	phase_id INTEGER NOT NULL, 
	alias TEXT NOT NULL, 
	CONSTRAINT pk_alias PRIMARY KEY (alias_key), 
	CONSTRAINT fk_alias_phase_id_phase FOREIGN KEY(phase_id) REFERENCES phase (id)
);
INSERT INTO "alias" VALUES('feinsilber',1,'Feinsilber');
CREATE TABLE history (
	number INTEGER NOT NULL, 
	at TEXT NOT NULL, 
	who TEXT NOT NULL, 
	login TEXT NOT NULL, 
	host TEXT NOT NULL, 
	program_version TEXT NOT NULL, 
	action TEXT NOT NULL, 
	kind TEXT NOT NULL, 
	"key" TEXT NOT NULL, 
	"before" TEXT, 
	"after" TEXT, 
	remark TEXT NOT NULL, 
	previous_hash VARCHAR(64) NOT NULL, 
	hash VARCHAR(64) NOT NULL, 
	CONSTRAINT pk_history PRIMARY KEY (number)
);
INSERT INTO "history" VALUES(1,'2026-12-01T15:17:31.865677Z','Ann','ann','lab-pc','0.1.0','made','library','5ca602a1880c4f71bb89702096d31f04',NULL,'{"library_id":"5ca602a1880c4f71bb89702096d31f04"}','','0000000000000000000000000000000000000000000000000000000000000000','8fefac446d202efe8bce70c516af22e5bfee4d96182299539947a7fa60be8a03');
INSERT INTO "history" VALUES(2,'2026-12-01T15:17:31.936778Z','Ann','ann','lab-pc','0.1.0','entered','phase','80f7ca82b7b578c126240cc9ed11a7c2',NULL,'{"a_angstrom":4.0862,"aliases":["Feinsilber"],"drift_class":"alloy","drift_reason":"metal","entered_at":"2026-12-01T15:17:31.936778Z","entered_by":"Ann","formula":"Ag","lattice_type":"F","mineral_name":"Silver","name":"silver","sites":[{"b_iso":0.5,"label":"Ag1","position":[0.0,0.0,0.0],"species":[["Ag",1.0]]}],"sources":[{"citation":"Wyckoff, Crystal Structures 2nd ed. vol. 1 (1963)","density_g_cm3":10.501,"how":"library_value","kind":"handbook","year":1963},{"a_angstrom":4.0861,"citation":"Journal of Materials Science (1988) 23, 757-760","how":"read_in_source","kind":"paper","year":1988}],"space_group":"F m -3 m","standing":"draft","structure_type":"A1","tags":["metals"],"thermal_expansion_per_k":1.89e-05,"uid":"80f7ca82b7b578c126240cc9ed11a7c2","version":1}','','8fefac446d202efe8bce70c516af22e5bfee4d96182299539947a7fa60be8a03','a236bdca19d7cd9ef6b5b2e73c87eac9e3d351bfc513ebc148f12d5fef5ec570');
INSERT INTO "history" VALUES(3,'2026-12-01T15:17:31.961986Z','Ann','ann','lab-pc','0.1.0','entered','phase','1545fda12bb3dabc14e91b9e0074ff69',NULL,'{"a_angstrom":4.2417,"a_esd_angstrom":0.0002,"a_max_angstrom":4.25,"a_min_angstrom":4.22,"a_text":"4.2417(2)","drift_class":"solid solution","entered_at":"2026-12-01T15:17:31.961986Z","entered_by":"Ann","formula":"TiN","lattice_type":"F","measured_density_g_cm3":5.38,"name":"our nitride","remarks":"Zeile eins\n\"zwei\" – Ångström","sites":[{"b_iso":0.5,"label":"Ti1","position":[0.0,0.0,0.0],"species":[["Ti",1.0]]},{"b_iso":0.5,"label":"N1","position":[0.5,0.5,0.5],"species":[["N",1.0]]}],"sources":[{"citation":"own powder","doi":"10.1000/182","kind":"measured here"}],"space_group":"F m -3 m","standing":"draft","structure_type":"B1","temperature_K":298.0,"uid":"1545fda12bb3dabc14e91b9e0074ff69","version":1}','','a236bdca19d7cd9ef6b5b2e73c87eac9e3d351bfc513ebc148f12d5fef5ec570','7b824df10af1a41c021fc8465f4c663292f5c8c5fbe2f3f5f4d6482ba97339a6');
INSERT INTO "history" VALUES(4,'2026-12-01T15:17:31.989317Z','Ann','ann','lab-pc','0.1.0','entered','phase','f46d839fcbc5954bd56f9d74320fd36d',NULL,'{"a_angstrom":4.3,"drift_class":"line compound","entered_at":"2026-12-01T15:17:31.989317Z","entered_by":"Ann","formula":"FeO","lattice_type":"F","name":"typing slip","sources":[{"citation":"recalled","how":"from_memory","kind":"from memory"}],"standing":"draft","uid":"f46d839fcbc5954bd56f9d74320fd36d","version":1}','','7b824df10af1a41c021fc8465f4c663292f5c8c5fbe2f3f5f4d6482ba97339a6','fb401109e6c7cfb88d839cf812152f4cd00b1745089a70eab52f8bd2e8397cf4');
INSERT INTO "history" VALUES(5,'2026-12-01T15:17:32.011343Z','Bob','ann','lab-pc','0.1.0','checked','phase','80f7ca82b7b578c126240cc9ed11a7c2','{"a_angstrom":4.0862,"aliases":["Feinsilber"],"drift_class":"alloy","drift_reason":"metal","entered_at":"2026-12-01T15:17:31.936778Z","entered_by":"Ann","formula":"Ag","lattice_type":"F","mineral_name":"Silver","name":"silver","sites":[{"b_iso":0.5,"label":"Ag1","position":[0.0,0.0,0.0],"species":[["Ag",1.0]]}],"sources":[{"citation":"Wyckoff, Crystal Structures 2nd ed. vol. 1 (1963)","density_g_cm3":10.501,"how":"library_value","kind":"handbook","year":1963},{"a_angstrom":4.0861,"citation":"Journal of Materials Science (1988) 23, 757-760","how":"read_in_source","kind":"paper","year":1988}],"space_group":"F m -3 m","standing":"draft","structure_type":"A1","tags":["metals"],"thermal_expansion_per_k":1.89e-05,"uid":"80f7ca82b7b578c126240cc9ed11a7c2","version":1}','{"a_angstrom":4.0862,"aliases":["Feinsilber"],"checked_at":"2026-12-01T15:17:32.011343Z","checked_by":"Bob","drift_class":"alloy","drift_reason":"metal","entered_at":"2026-12-01T15:17:31.936778Z","entered_by":"Ann","formula":"Ag","lattice_type":"F","mineral_name":"Silver","name":"silver","sites":[{"b_iso":0.5,"label":"Ag1","position":[0.0,0.0,0.0],"species":[["Ag",1.0]]}],"sources":[{"citation":"Wyckoff, Crystal Structures 2nd ed. vol. 1 (1963)","density_g_cm3":10.501,"how":"library_value","kind":"handbook","year":1963},{"a_angstrom":4.0861,"citation":"Journal of Materials Science (1988) 23, 757-760","how":"read_in_source","kind":"paper","year":1988}],"space_group":"F m -3 m","standing":"checked","structure_type":"A1","tags":["metals"],"thermal_expansion_per_k":1.89e-05,"uid":"80f7ca82b7b578c126240cc9ed11a7c2","version":2}','','fb401109e6c7cfb88d839cf812152f4cd00b1745089a70eab52f8bd2e8397cf4','e9a28b2c447b33a9eefc699ac5ac997e7e8aae3fafffc067d4d6c6efc2c05a1b');
INSERT INTO "history" VALUES(6,'2026-12-01T15:17:32.053159Z','Bob','ann','lab-pc','0.1.0','revised','phase','1545fda12bb3dabc14e91b9e0074ff69','{"a_angstrom":4.2417,"a_esd_angstrom":0.0002,"a_max_angstrom":4.25,"a_min_angstrom":4.22,"a_text":"4.2417(2)","drift_class":"solid solution","entered_at":"2026-12-01T15:17:31.961986Z","entered_by":"Ann","formula":"TiN","lattice_type":"F","measured_density_g_cm3":5.38,"name":"our nitride","remarks":"Zeile eins\n\"zwei\" – Ångström","sites":[{"b_iso":0.5,"label":"Ti1","position":[0.0,0.0,0.0],"species":[["Ti",1.0]]},{"b_iso":0.5,"label":"N1","position":[0.5,0.5,0.5],"species":[["N",1.0]]}],"sources":[{"citation":"own powder","doi":"10.1000/182","kind":"measured here"}],"space_group":"F m -3 m","standing":"draft","structure_type":"B1","temperature_K":298.0,"uid":"1545fda12bb3dabc14e91b9e0074ff69","version":1}','{"a_angstrom":4.2421,"a_esd_angstrom":0.0002,"a_max_angstrom":4.25,"a_min_angstrom":4.22,"a_text":"4.2421","changed_at":"2026-12-01T15:17:32.053159Z","changed_by":"Bob","drift_class":"solid solution","entered_at":"2026-12-01T15:17:31.961986Z","entered_by":"Ann","formula":"TiN","lattice_type":"F","measured_density_g_cm3":5.38,"name":"our nitride","remarks":"Zeile eins\n\"zwei\" – Ångström","sites":[{"b_iso":0.5,"label":"Ti1","position":[0.0,0.0,0.0],"species":[["Ti",1.0]]},{"b_iso":0.5,"label":"N1","position":[0.5,0.5,0.5],"species":[["N",1.0]]}],"sources":[{"citation":"own powder","doi":"10.1000/182","kind":"measured here"}],"space_group":"F m -3 m","standing":"draft","structure_type":"B1","temperature_K":298.0,"uid":"1545fda12bb3dabc14e91b9e0074ff69","version":2}','new standard','e9a28b2c447b33a9eefc699ac5ac997e7e8aae3fafffc067d4d6c6efc2c05a1b','4362ad508b1e038dd7bfca67ef3f2761ca93edce9b19ad62346671fddf0f3693');
INSERT INTO "history" VALUES(7,'2026-12-01T15:17:32.077318Z','Bob','ann','lab-pc','0.1.0','withdrawn','phase','f46d839fcbc5954bd56f9d74320fd36d','{"a_angstrom":4.3,"drift_class":"line compound","entered_at":"2026-12-01T15:17:31.989317Z","entered_by":"Ann","formula":"FeO","lattice_type":"F","name":"typing slip","sources":[{"citation":"recalled","how":"from_memory","kind":"from memory"}],"standing":"draft","uid":"f46d839fcbc5954bd56f9d74320fd36d","version":1}','{"a_angstrom":4.3,"drift_class":"line compound","entered_at":"2026-12-01T15:17:31.989317Z","entered_by":"Ann","formula":"FeO","lattice_type":"F","name":"typing slip","replaced_by":"1545fda12bb3dabc14e91b9e0074ff69","sources":[{"citation":"recalled","how":"from_memory","kind":"from memory"}],"standing":"withdrawn","uid":"f46d839fcbc5954bd56f9d74320fd36d","version":2,"withdrawn_reason":"wrong formula"}','wrong formula','4362ad508b1e038dd7bfca67ef3f2761ca93edce9b19ad62346671fddf0f3693','2ef4a442d513c2c76c4812a37c76124f238448ae5e90bc71f3f7ce93f72defc3');
CREATE TABLE phase (
	id INTEGER NOT NULL, 
	uid VARCHAR(32) NOT NULL, 
	name TEXT NOT NULL, 
	name_key TEXT NOT NULL, 
	mineral_name TEXT NOT NULL, 
	formula TEXT NOT NULL, 
	formula_key TEXT NOT NULL, 
	elements TEXT NOT NULL, 
	lattice_type VARCHAR(1) NOT NULL, 
	a_angstrom DOUBLE NOT NULL, 
	a_esd_angstrom DOUBLE, 
	a_text TEXT NOT NULL, 
	temperature_k DOUBLE, 
	expansion_per_k DOUBLE, 
	structure_type TEXT, 
	free_parameters TEXT NOT NULL, 
	space_group TEXT NOT NULL, 
	formula_units_per_cell DOUBLE, 
	assumed TEXT NOT NULL, 
	drift_class TEXT NOT NULL, 
	drift_reason TEXT NOT NULL, 
	a_min_angstrom DOUBLE, 
	a_max_angstrom DOUBLE, 
	measured_density_g_cm3 DOUBLE, 
	remarks TEXT NOT NULL, 
	standing TEXT NOT NULL, 
	version INTEGER NOT NULL, 
	entered_by TEXT NOT NULL, 
	entered_at TEXT NOT NULL, 
	changed_by TEXT, 
	changed_at TEXT, 
	checked_by TEXT, 
	checked_at TEXT, 
	withdrawn_reason TEXT, 
	replaced_by VARCHAR(32), 
	checksum VARCHAR(64) NOT NULL, 
	CONSTRAINT pk_phase PRIMARY KEY (id), 
	CONSTRAINT ck_phase_lattice_type CHECK (lattice_type IN ('P', 'I', 'F')), 
	CONSTRAINT ck_phase_a_angstrom CHECK (a_angstrom > 0 AND a_angstrom < 1000), 
	CONSTRAINT ck_phase_standing CHECK (standing IN ('draft', 'checked', 'withdrawn')), 
	CONSTRAINT ck_phase_drift_class CHECK (drift_class IN ('line compound', 'alloy', 'solid solution')), 
	CONSTRAINT ck_phase_version CHECK (version >= 1), 
	CONSTRAINT uq_phase_uid UNIQUE (uid), 
	CONSTRAINT uq_phase_name_key UNIQUE (name_key)
);
INSERT INTO "phase" VALUES(1,'80f7ca82b7b578c126240cc9ed11a7c2','silver','silver','Silver','Ag','Ag',' Ag ','F',4.0862,NULL,'',NULL,1.89e-05,'A1','','F m -3 m',NULL,'[]','alloy','metal',NULL,NULL,NULL,'','checked',2,'Ann','2026-12-01T15:17:31.936778Z',NULL,NULL,'Bob','2026-12-01T15:17:32.011343Z',NULL,NULL,'75e7be881c3f92742d78f42dc8f4f29e333de0b069a885c603d7b17895acd76f');
INSERT INTO "phase" VALUES(2,'1545fda12bb3dabc14e91b9e0074ff69','our nitride','our nitride','','TiN','NTi',' Ti N ','F',4.2421,0.0002,'4.2421',298.0,NULL,'B1','','F m -3 m',NULL,'[]','solid solution','',4.22,4.25,5.38,'Zeile eins
"zwei" – Ångström','draft',2,'Ann','2026-12-01T15:17:31.961986Z','Bob','2026-12-01T15:17:32.053159Z',NULL,NULL,NULL,NULL,'e2db83b2034c67d056e05d082bb16bcdb55ea97dad21423fecc1bf81a7fe7420');
INSERT INTO "phase" VALUES(3,'f46d839fcbc5954bd56f9d74320fd36d','typing slip','typing slip','','FeO','FeO',' Fe O ','F',4.3,NULL,'',NULL,NULL,NULL,'','',NULL,'[]','line compound','',NULL,NULL,NULL,'','withdrawn',2,'Ann','2026-12-01T15:17:31.989317Z',NULL,NULL,NULL,NULL,'wrong formula','1545fda12bb3dabc14e91b9e0074ff69','66171e7e705acc67354e214de78ec10b5f3e86d461bd3c94b21773bd93a3d87f');
CREATE TABLE site (
	phase_id INTEGER NOT NULL, 
	position INTEGER NOT NULL, 
	label TEXT NOT NULL, 
	species TEXT NOT NULL, 
	x DOUBLE NOT NULL, 
	y DOUBLE NOT NULL, 
	z DOUBLE NOT NULL, 
	b_iso DOUBLE NOT NULL, 
	CONSTRAINT pk_site PRIMARY KEY (phase_id, position), 
	CONSTRAINT fk_site_phase_id_phase FOREIGN KEY(phase_id) REFERENCES phase (id)
);
INSERT INTO "site" VALUES(1,0,'Ag1','[["Ag",1.0]]',0.0,0.0,0.0,0.5);
INSERT INTO "site" VALUES(2,0,'Ti1','[["Ti",1.0]]',0.0,0.0,0.0,0.5);
INSERT INTO "site" VALUES(2,1,'N1','[["N",1.0]]',0.5,0.5,0.5,0.5);
CREATE TABLE source (
	phase_id INTEGER NOT NULL, 
	position INTEGER NOT NULL, 
	citation TEXT NOT NULL, 
	doi TEXT NOT NULL, 
	year INTEGER, 
	kind TEXT NOT NULL, 
	how TEXT NOT NULL, 
	a_angstrom DOUBLE, 
	density_g_cm3 DOUBLE, 
	CONSTRAINT pk_source PRIMARY KEY (phase_id, position), 
	CONSTRAINT fk_source_phase_id_phase FOREIGN KEY(phase_id) REFERENCES phase (id), 
	CONSTRAINT ck_source_kind CHECK (kind IN ('standard', 'handbook', 'paper', 'data package', 'measured here', 'from memory'))
);
INSERT INTO "source" VALUES(1,0,'Wyckoff, Crystal Structures 2nd ed. vol. 1 (1963)','',1963,'handbook','library_value',NULL,10.501);
INSERT INTO "source" VALUES(1,1,'Journal of Materials Science (1988) 23, 757-760','',1988,'paper','read_in_source',4.0861,NULL);
INSERT INTO "source" VALUES(2,0,'own powder','10.1000/182',NULL,'measured here','',NULL,NULL);
INSERT INTO "source" VALUES(3,0,'recalled','',NULL,'from memory','from_memory',NULL,NULL);
CREATE TABLE state (
	id INTEGER NOT NULL, 
	library_id VARCHAR(32) NOT NULL, 
	phase_count INTEGER NOT NULL, 
	fingerprint VARCHAR(64) NOT NULL, 
	history_count INTEGER NOT NULL, 
	history_head VARCHAR(64) NOT NULL, 
	CONSTRAINT pk_state PRIMARY KEY (id), 
	CONSTRAINT ck_state_one_row CHECK (id = 1)
);
INSERT INTO "state" VALUES(1,'5ca602a1880c4f71bb89702096d31f04',2,'beda60b88fe6c6abb9a77283dc351f7747db11027887049aa2b0e4b7d14f240e',7,'2ef4a442d513c2c76c4812a37c76124f238448ae5e90bc71f3f7ce93f72defc3');
CREATE TABLE strength_cache (
	phase_id INTEGER NOT NULL, 
	method INTEGER NOT NULL, 
	n BLOB NOT NULL, 
	strength BLOB NOT NULL, 
	checksum VARCHAR(64) NOT NULL, 
	CONSTRAINT pk_strength_cache PRIMARY KEY (phase_id), 
	CONSTRAINT fk_strength_cache_phase_id_phase FOREIGN KEY(phase_id) REFERENCES phase (id)
);
INSERT INTO "strength_cache" VALUES(1,1,X'0300000004000000080000000B0000000C000000100000001300000014000000180000001B000000200000002300000024000000280000002B0000002C000000300000003300000034000000380000003B000000400000004300000044000000480000004B0000004C00000050000000',X'E58EA1B44C610541A7C5EB6D4574FC400E835600C16603416BEAD1EC45110F4189B0ABA64065F340D5CF9860F916E740600B24A8AAEA03410E96AC11C5070341553DAC5BEF18004116C534717B29034107ABDC0B142DE84020B169D2FEF00541AD7C7AA7B593FA40D103EB8D63CFF24094EB350B1C35F14092089A711BB6F0404B720B0119DBD34018D8F64CC45BFB4072FA5BEAE499EA40C0938FEEE3CCF740E64A5849D56F00414FEC2CE43C21C340E2E6313D4BA5E140558CE175DE2DF1409F46B060F229E7401AD446D47BA4F0408F6DC6F4E9C9DB40E65169916706D940','382e874a67e12feaa185395b5aec97401915cf0f374ade57734b07b19d035861');
INSERT INTO "strength_cache" VALUES(2,1,X'0300000004000000080000000B0000000C000000100000001300000014000000180000001B000000200000002300000024000000280000002B0000002C000000300000003300000034000000380000003B000000400000004300000044000000480000004B0000004C00000050000000530000005400000058000000',X'E488AFD99F8FD040899735368594E04067F294CE776AE440E6AEA606CBD3D9405F41679C4C09D340711C10EF03A0C5405E0DA75DD70DD040D2C40812C652E14018A83370DCE2DC40C43408AF8D6ECE40D48CBF9A43A4C5406E9466BAE085D14037867816BEF2D74063FB6D8BD01BD140AA559A1354FDBB408C026C3550BCCE4057AA7899837AB24092CDEF7872CBC64011CFE9AB8110C9400C25942A52B5D640AF442B562E1FCC4041C9DC07B9B5A240939178C36F01AF4060B64C145601D140EBE28449EF32C7404A2205EF8503BE40A2363EEDD725BC40BC5D57F386A0B9406F6871FCBE0CC0407DA03E6EC057C740617454597A45B540','46ac95fdeab678260fd223c230c47e3303990be7eeadca37ffcc9298781334e7');
CREATE TABLE tag (
	phase_id INTEGER NOT NULL, 
	tag TEXT NOT NULL, 
	CONSTRAINT pk_tag PRIMARY KEY (phase_id, tag), 
	CONSTRAINT fk_tag_phase_id_phase FOREIGN KEY(phase_id) REFERENCES phase (id)
);
INSERT INTO "tag" VALUES(1,'metals');
CREATE INDEX ix_phase_lattice_type_a_angstrom ON phase (lattice_type, a_angstrom, standing);
CREATE INDEX ix_alias_phase_id ON alias (phase_id);
CREATE INDEX ix_history_key ON history ("key");
CREATE TRIGGER history_no_update BEFORE UPDATE ON history BEGIN SELECT RAISE(ABORT, 'the history is append-only'); END;
CREATE TRIGGER history_no_delete BEFORE DELETE ON history BEGIN SELECT RAISE(ABORT, 'the history is append-only'); END;
COMMIT;
