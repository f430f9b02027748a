//! `job.toml` of the demo.

/// The whole file.
pub const JOB_TOML: &str = r#"# Loop tuning of Unit 200, Larkmoor Solvent Recovery. The plant is invented.

[job]
plant = "Larkmoor Solvent Recovery"
owner = "Larkmoor Solvents"
area = "Unit 200 - Distillation"
document = "LM-200-IC-{tag}"
dossier = "LM-200-IC-DOSSIER"
revision = "0"
date = 2026-03-14
reason = "Issued for hand-over"
page = "a4"

[[revision_history]]
revision = "A"
date = 2026-03-09
reason = "Issued for review"

[[procedure]]
title = "Permit to work"
reference = "LM-SP-014"

[[procedure]]
title = "Management of change"
reference = "LM-SP-021"

[[procedure]]
title = "Tests on control loops"
reference = "LM-SP-033"

[[signature]]
role = "Tested by"
name = "A. Quill"

[[signature]]
role = "Checked by"
name = "R. Dunmore"

[[signature]]
role = "Approved by"
name = "S. Okafor-Lind"

[[signature]]
role = "Accepted for operations"

[[caution]]
loops = ["PIC-206", "PIC-211"]
text = "The relief path of column C-201 must be lined up and its isolation valves locked open before the pressure is moved in manual."

# The night test of the vent condenser runs through the end of summer time.
[[log]]
files = ["logs/tic212*.xlsx"]
zone = "Europe/Berlin"

[[log]]
files = ["logs/tic202*.csv"]
decimal = ","

[[log]]
files = ["logs/aic208*.csv"]
dates = "dmy"
"#;
