use proptest::prelude::*;

use super::*;

fn read(text: &str) -> Result<Intent, ReadError> {
    read_intent(&[Source::from_text("x.upf", text)], &IntentOptions::default())
}

const RAILS: &str =
    "foreach r {VDD VSS VX} {create_supply_net $r}\ncreate_power_domain PD_A -elements {u_a}\n";
const SWITCH: &str = "create_power_switch sw -domain PD_A -input_supply_port {vin VDD} -output_supply_port {vout VX} \
                      -control_port {ctl u_k/ctl} ";

#[test]
fn mistakes_are_named_at_their_word() {
    let mut wrong = Vec::new();
    for (text, wanted) in [
        ("", "x.upf: no command of power intent found (the file is empty)"),
        ("# only\n", "x.upf: no command of power intent found"),
        (
            "crate_power_domain A",
            "x.upf:3:1: command `crate_power_domain` is not defined; did you mean `create_power_domain`?",
        ),
        (
            "create_power_domain B -elemnts {u_b}",
            "x.upf:3:23: option `-elemnts` is not defined; did you mean `-elements`?",
        ),
        (
            "create_power_domain B -elem {u_b}",
            "x.upf:3:23: option `-elem` is not defined; did you mean `-elements`?",
        ),
        (
            "create_power_domain B -elements -include_scope",
            "x.upf:3:23: `-elements` of `create_power_domain` without its value",
        ),
        (
            "create_power_domain B -elements",
            "x.upf:3:23: `-elements` of `create_power_domain` without its value",
        ),
        ("create_power_domain", "x.upf:3:1: `create_power_domain` without its name"),
        ("create_power_domain B C", "x.upf:3:23: `C` is one word too many for `create_power_domain`"),
        ("create_power_domain B -include_scope -include_scope", "x.upf:3:38: `-include_scope` stands twice"),
        ("create_power_domain PD_A", "x.upf:3:21: power domain `PD_A` is defined twice; first in x.upf:2:21"),
        (
            "create_power_domain PD_B -update",
            "x.upf:3:21: power domain `PD_B` is not defined; did you mean `PD_A`?",
        ),
        ("create_power_domain B \\ \n -include_scope", "x.upf:3:23: a word of blanks; a backslash goes on"),
        ("create_power_domain {}", "x.upf:3:21: `` is no name"),
        ("create_supply_net VDD", "x.upf:3:19: supply net `VDD` is defined twice; first in x.upf:1:43"),
        (
            "create_supply_net N -domain PD_AA",
            "x.upf:3:29: power domain `PD_AA` is not defined; did you mean `PD_A`?",
        ),
        ("create_supply_port P -direction input", "x.upf:3:22: direction `input` is not defined"),
        (
            "set_domain_supply_net PD_A -primary_power_net VDD",
            "x.upf:3:1: `set_domain_supply_net` without `-primary_ground_net`",
        ),
        (
            "set_domain_supply_net PD_A -primary_power_net VSSS -primary_ground_net VSS",
            "x.upf:3:47: supply net `VSSS` is not defined; did you mean `VSS`?",
        ),
        (
            "set_domain_supply_net PD_A -primary_power_net VDD -primary_ground_net VSS\nset_domain_supply_net PD_A -primary_power_net VX -primary_ground_net VSS",
            "x.upf:4:47: two primary power nets for power domain `PD_A`: `VDD` and `VX`; want one",
        ),
        (
            "create_supply_set S -function {powr VDD}",
            "x.upf:3:32: function of a supply set `powr` is not defined; did you mean `power`?",
        ),
        (
            "create_supply_set S -function {power VDD}\ncreate_supply_set S -function {power VX} -update",
            "x.upf:4:38: two nets for `power` of supply set `S`",
        ),
        (
            "create_supply_set S\ncreate_supply_set T\nassociate_supply_set S -handle PD_A.primary\nassociate_supply_set T -handle PD_A.primary",
            "x.upf:6:32: two supply sets for `primary` of power domain `PD_A`",
        ),
        (
            "create_supply_set S\nassociate_supply_set S -handle PD_B.primary",
            "x.upf:4:32: supply set handle `PD_B.primary` is not defined; did you mean `PD_A.primary`?",
        ),
        (
            "connect_supply_net VDDD -ports VDD",
            "x.upf:3:20: supply net `VDDD` is not defined; did you mean `VDD`?",
        ),
        (
            "create_power_switch sw -domain PD_A -input_supply_port {i VDD} -output_supply_port {o VX}",
            "x.upf:3:1: `create_power_switch` without `-control_port`",
        ),
        (
            "SW -on_state {ON vn {ctl}}",
            "x.upf:3:138: input port of the switch `vn` is not defined; did you mean `vin`?",
        ),
        (
            "SW -on_state {ON vin {!ct}}",
            "x.upf:3:144: control port of the switch `ct` is not defined; did you mean `ctl`?",
        ),
        ("SW -on_state {ON vin {ctl &}}", "x.upf:3:148: in the condition: the condition ends too early"),
        (
            "SW -on_state {ON vin}",
            "x.upf:3:134: `ON vin` is no state of a switch; want `{name input {condition}}`",
        ),
        (
            "SW -on_states {ON vin ctl}",
            "x.upf:3:124: option `-on_states` is not defined; did you mean `-on_state`?",
        ),
        ("set_isolation i -domain PD_A -clamp_value 2a", "x.upf:3:43: clamp value `2a`"),
        (
            "set_isolation i -domain PD_A -applies_to output",
            "x.upf:3:42: side of a domain `output` is not defined; did you mean `outputs`?",
        ),
        ("set_isolation i -elements u_a", "x.upf:3:1: `set_isolation` without `-domain`"),
        (
            "set_isolation i -domain PD_A\nset_isolation j -domain PD_A -update",
            "x.upf:4:15: isolation strategy `j` is not defined; did you mean `i`?",
        ),
        (
            "set_isolation_control i -domain PD_A -isolation_signal s",
            "x.upf:3:23: isolation strategy `i` is not defined",
        ),
        (
            "set_isolation i -domain PD_A\nset_isolation i -domain PD_A -isolation_signal s",
            "x.upf:4:15: isolation strategy `i` is defined twice; first in x.upf:3:15",
        ),
        ("set_retention r -domain PD_A -save_signal {s up}", "x.upf:3:46: level of a signal `up`"),
        ("set_retention r -domain PD_A -save_signal s", "x.upf:3:43: `s` is no signal with its level"),
        ("set_level_shifter l -domain PD_A -rule low_high", "x.upf:3:40: rule `low_high`"),
        ("add_port_state VDD -state {UP 1.x}", "x.upf:3:31: `1.x` is no voltage"),
        ("add_port_state VDD -state {UP 1.0 0.9}", "x.upf:3:27: `UP 1.0 0.9` is no state of a supply"),
        (
            "add_port_state VDD -state {UP 1} -state {UP 2}",
            "x.upf:3:42: state `UP` of `VDD` is defined twice",
        ),
        (
            "add_port_state VDD -state {UP 1}\ncreate_pst t -supplies {VDD VSS}\nadd_pst_state a -pst t -state {UP}",
            "x.upf:5:31: 1 states for the 2 supplies of `t`",
        ),
        (
            "add_port_state VDD -state {UP 1}\ncreate_pst t -supplies VDD\nadd_pst_state a -pst t -state {UPP}",
            "x.upf:5:32: state of a supply `UPP` is not defined; did you mean `UP`?",
        ),
        (
            "add_power_state PD_A -state {ON -logic_exp {a}}",
            "x.upf:3:33: option `-logic_exp` is not defined; did you mean `-logic_expr`?",
        ),
        ("upf_version two", "x.upf:3:13: `two` is no version"),
        ("while {1} {create_logic_net a}", "x.upf:3:"),
        ("proc f {} {f}\nf", "x.upf:3:12: scripts within scripts go more than 100 deep"),
        ("load_upf nowhere.upf", "x.upf:3:10: `nowhere.upf` cannot be read: no such file"),
    ] {
        let whole = if text.is_empty() || text.starts_with('#') {
            text.to_owned()
        } else {
            format!("{RAILS}{}", text.replace("SW ", SWITCH))
        };
        let got = read(&whole).map_or_else(|e| e.to_string(), |_| "no error".into());
        if !got.starts_with(wanted) {
            wrong.push(format!("{text}\n got {got}\nwant {wanted}"));
        }
    }
    assert!(wrong.is_empty(), "{}", wrong.join("\n"));
}

#[test]
fn forms_of_real_files_are_understood() {
    let text = format!(
        "{RAILS}{SWITCH} -on_state {{ON vin {{!ctl}}}}\n\
         create_power_switch two -domain PD_A -input_supply_port {{vin VDD}} -output_supply_port vout \
           -control_port {{a u_a/\\x[0]/y}} -control_port b -ack_port {{ack u_k/ack {{!a}}}} \
           -on_state {{ON vin {{!a & b}}}} -on_partial_state {{HALF vin {{a & b}}}} -off_state {{OFF {{!b}}}}\n\
         create_power_switch three -domain PD_A -input_supply_port {{in VDD}} -output_supply_port {{out}} \
           -control_port ctrl -on_state \"ON in {{ctrl}}\" \\\n\n\
         connect_supply_net VX -ports three/out\n\
         add_power_state PD_A -state RUN {{-logic_expr {{ctl}} -supply_expr {{power == `{{FULL_ON, 1.2}}}}}} \
           -state {{OFF -simstate CORRUPT -illegal}} -complete\n\
         add_power_state PD_A -state {{RUN -simstate NORMAL}} -update\n\
         set_isolation i -domain PD_A -clamp_value {{0 1}} -applies_to both\n\
         set_isolation_control i -domain PD_A -isolation_signal {{u_k/i u_k/j}} -isolation_sense {{high low}}\n\
         set_retention r -domain PD_A -retention_power_net VDD\n\
         set_retention_control r -domain PD_A -save_signal {{u_k/s high}} -restore_signal {{u_k/s low}}\n\
         set_level_shifter l -domain PD_A -rule both -location self\n\
         create_power_domain PD_A -update -elements {{u_b u_a}}\n\
         map_power_switch sw -domain PD_A -lib_cells HDR\n"
    );
    let i = read(&text).unwrap();
    assert_eq!(i.domains[0].elements.iter().map(|e| e.path.as_str()).collect::<Vec<_>>(), ["u_a", "u_b"]);
    assert_eq!(i.switches.len(), 3);
    let two = i.switch("two").unwrap();
    assert_eq!(two.controls[0].net.as_deref(), Some("u_a/x[0]/y"));
    assert_eq!(two.conducts(&|port| Some(port == "b")), Some(true));
    assert_eq!(two.conducts(&|port| (port == "b").then_some(false)), Some(false));
    assert_eq!(two.conducts(&|_| None), None);
    let silent = read(&format!("{RAILS}{SWITCH}\n")).unwrap();
    assert_eq!(silent.switches[0].conducts(&|_| Some(true)), None);
    assert_eq!(two.acks[0].condition.as_ref().unwrap().to_string(), "!a");
    assert_eq!(i.switch("three").unwrap().on_states[0].input.as_deref(), Some("in"));
    let run = &i.power_states[0];
    assert_eq!((run.logic.as_deref(), run.simstate.as_deref()), (Some("ctl"), Some("NORMAL")));
    assert_eq!(run.supply.as_deref(), Some("power == `{FULL_ON, 1.2}"));
    assert_eq!(i.power_states[1].legal, Some(false));
    let signals: Vec<_> = i.isolations[0].signals.iter().map(|s| s.path.as_str()).collect();
    assert_eq!(
        (signals, &i.isolations[0].senses),
        (vec!["u_k/i", "u_k/j"], &vec!["high".to_owned(), "low".into()])
    );
    assert_eq!(i.retentions[0].restore.as_ref().unwrap().edge, "low");
    assert!(i.notes.iter().any(|n| n.code == "command-without-use" && n.text.contains("map_power_switch")));
}

#[test]
fn scopes_make_names_whole() {
    let i = read("set_scope u_a\ncreate_power_domain P -elements {u_b {.} \\\\x.y\\[0\\]}\nset_scope u_c\ncreate_power_domain P\nset_scope ..\nset_scope /\ncreate_power_domain P\n").unwrap();
    let names: Vec<_> = i.domains.iter().map(|d| d.name.as_str()).collect();
    assert_eq!(names, ["u_a/P", "u_a/u_c/P", "P"]);
    let paths: Vec<_> = i.domains[0].elements.iter().map(|e| e.path.as_str()).collect();
    assert_eq!(paths, ["u_a/u_b", "u_a", "u_a/x.y[0]"]);
    assert_eq!(i.scopes.len(), 2);
}

#[test]
fn every_option_of_the_table_is_well_formed() {
    for command in COMMANDS {
        assert!(COMMANDS.iter().filter(|c| c.name == command.name).count() == 1, "{}", command.name);
        table::check(command);
    }
}

proptest! {
    #[test]
    fn no_text_panics(
        words in proptest::collection::vec(
            prop_oneof![
                Just("create_power_domain"), Just("create_power_switch"), Just("set_isolation"), Just("A"), Just("-elements"),
                Just("-domain"), Just("{a b}"), Just("-on_state"), Just("{ON in {!c}}"), Just("\n"), Just("-update"),
                Just("create_supply_net"), Just("set_scope"), Just("add_power_state"), Just("-state"), Just("{"), Just("[")
            ],
            0..20,
        ),
        noise in "[a-z{}\\[\\]\"\\\\ \n$-]{0,10}",
    ) {
        let _ = read(&format!("{}{noise}", words.join(" ")));
    }
}
