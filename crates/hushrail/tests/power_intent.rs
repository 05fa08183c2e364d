//! Power intent on real text and on the demonstration's netlist.

use std::collections::BTreeMap;
use std::path::{Path, PathBuf};

use hushrail::batch::load_study;
use hushrail::batch::study::read_study;
use hushrail::read::intent::{Intent, IntentOptions, read_intent, resolve};
use hushrail::read::verilog::connect::{ConnectOptions, Connected, connect};
use hushrail::read::verilog::read_verilog;
use hushrail::read::{Input, Source};

fn here(path: &str) -> PathBuf {
    Path::new(env!("CARGO_MANIFEST_DIR")).join(path)
}

fn env(pairs: &[(&str, &str)]) -> BTreeMap<String, String> {
    pairs.iter().map(|(k, v)| ((*k).to_owned(), (*v).to_owned())).collect()
}

const BUOY: &str = "../../python/hushrail/demo_data/buoy_hub.v";

fn buoy() -> Connected {
    let mut inputs = [Input::file(&here(BUOY))];
    connect(&mut inputs, Some("buoy_hub"), &(), &ConnectOptions::default())
        .expect("the demonstration's netlist")
}

fn buoy_intent(pairs: &[(&str, &str)]) -> Intent {
    let source = Source::open(&here("tests/data/buoy_hub.upf")).expect("there");
    read_intent(&[source], &IntentOptions::default().env(env(pairs))).expect("good")
}

#[test]
fn a_real_file_is_read_completely() {
    let path = here("../../../shared/data/upf/upf_Tile_PE.tcl");
    if !path.exists() {
        println!("skipped: {} is not there", path.display());
        return;
    }
    let source = Source::open(&path).expect("text");
    for (soc, register) in [("onyx", "15"), ("amber", "17")] {
        let options = IntentOptions::default().env(env(&[("WHICH_SOC", soc)]));
        let intent = read_intent(std::slice::from_ref(&source), &options).expect("good");
        let names: Vec<_> = intent.domains.iter().map(|d| d.name.as_str()).collect();
        assert_eq!(names, ["TOP", "AON"]);
        assert!(intent.domains[0].include_scope);
        let elements: Vec<_> = intent.domains[1].elements.iter().map(|e| e.path.as_str()).collect();
        assert_eq!(elements.len(), 8);
        assert_eq!(elements[1], format!("DECODE_FEATURE_{register}"));
        assert!(elements.contains(&"coreir_eq_16_inst0") && elements.contains(&"const_0_8"));
        // the place of an element is that of the name in the quoted list
        let line = source.text.lines().position(|l| l.contains("const_511_9")).expect("there") + 1;
        let at = &intent.domains[1].elements.iter().find(|e| e.path == "const_511_9").expect("there").at;
        assert_eq!((at.line as usize, at.column), (line, 3));
        let switch = intent.switch("SD_sw").expect("there");
        assert_eq!(switch.controls[0].net.as_deref(), Some("PowerDomainConfigReg_inst0/read_config_data[0]"));
        assert_eq!(switch.on_states[0].condition.to_string(), "!SD_sd");
        assert_eq!(switch.conducts(&|_| Some(true)), Some(false));
        assert_eq!(switch.output.net.as_deref(), Some("VDD_SW"));
        assert_eq!(intent.domains[0].primary_power.as_deref(), Some("VDD_SW"));
        let rows: Vec<_> = intent.state_tables[0].rows.iter().map(|r| r.states.join(" ")).collect();
        assert_eq!(rows, ["HighVoltage SD_OFF", "HighVoltage HighVoltage"]);
        assert_eq!(intent.notes.iter().filter(|n| n.code == "command-without-use").count(), 2);
    }
    // cut off anywhere: an error or an answer
    let text = &source.text;
    for end in (0..text.len()).filter(|i| text.is_char_boundary(*i)) {
        let cut = Source::from_text("cut.upf", &text[..end]);
        match read_intent(&[cut], &IntentOptions::default()) {
            Ok(intent) => assert!(
                text[..end].ends_with('\n') || intent.notes.iter().any(|n| n.code == "last-line-open")
            ),
            Err(e) => assert!(e.to_string().starts_with("cut.upf"), "{e}"),
        }
    }
}

#[test]
fn counts_by_domain_are_counts_by_path() {
    let net = buoy();
    let intent = buoy_intent(&[]);
    let map = resolve(&intent, &net).expect("fits");
    let by_path = read_verilog(&[Source::open(&here(BUOY)).expect("there")]).expect("good");
    let under = |path: &str| by_path.counts_under(Some("buoy_hub"), path).expect("there");
    let minus = |a: &str, b: &[&str]| {
        let mut counts = under(a).counts;
        for path in b {
            for (cell, n) in under(path).counts {
                *counts.get_mut(&cell).expect("in the whole") -= n;
            }
        }
        counts.retain(|_, n| *n > 0);
        counts.sort_keys();
        counts
    };
    for (domain, wanted) in [
        ("PD_DSP", minus("u_dsp", &["u_dsp/u_control"])),
        ("u_dsp/PD_CONTROL", minus("u_dsp/u_control", &[])),
        ("PD_LINK", minus("u_link", &[])),
        ("PD_KEEP", minus("", &["u_dsp", "u_link"])),
    ] {
        let mut got = map.domain(domain).expect(domain).counts.counts.clone();
        got.sort_keys();
        assert_eq!(got, wanted, "{domain}");
    }
    assert_eq!(map.outside.total(), 0);
    for instance in net.instances().step_by(97) {
        let path = net.instance_path(instance);
        let name = &map.domains[map.domain_of(instance).expect("covered")].name;
        assert_eq!(path.starts_with("u_link/"), name == "PD_LINK", "{path} in {name}");
    }
}

#[test]
fn switches_and_strategies_find_their_domains_and_nets() {
    let net = buoy();
    let map = resolve(&buoy_intent(&[]), &net).expect("fits");
    let dsp = map.domain("PD_DSP").expect("there");
    assert_eq!((dsp.headers.len(), dsp.footers.len()), (1, 0));
    assert_eq!(dsp.headers[0].controls[0].net, net.net("wake[0]"));
    assert_eq!(dsp.isolation_nets[0].net, net.net("u_dsp/run"));
    assert_eq!(dsp.isolations[0].clamp_values, ["1"]);
    let link = map.domain("PD_LINK").expect("there");
    assert_eq!((link.headers.len(), link.footers.len()), (0, 1));
    assert_eq!((link.power.as_deref(), link.ground.as_deref()), (Some("VDD"), Some("VSS_LINK")));
    assert_eq!(link.footers[0].acks[0].net, net.net("wake[1]"));
    let keep = map.domain("PD_KEEP").expect("there");
    assert!(!keep.is_switched());
    assert_eq!((keep.power.as_deref(), keep.ground.as_deref()), (Some("VDD"), Some("VSS")));
    let control = map.domain("u_dsp/PD_CONTROL").expect("there");
    assert!(!control.is_switched());
    let roles: Vec<_> = control.retention_nets.iter().map(|c| (c.role.as_str(), c.net)).collect();
    assert_eq!(roles, [("save", net.net("wake[0]")), ("restore", net.net("wake[0]"))]);
    assert!(map.notes.is_empty(), "{:?}", map.notes);
}

#[test]
fn the_environment_of_the_script_is_the_callers() {
    let map = resolve(&buoy_intent(&[("BUOY_LINK_ON", "1")]), &buoy()).expect("fits");
    assert!(map.domain("PD_LINK").is_none());
    let names: Vec<_> = map.domains.iter().map(|d| d.name.as_str()).collect();
    assert_eq!(names, ["PD_KEEP", "PD_DSP", "u_dsp/PD_CONTROL"]);
}

#[test]
fn objects_are_found_in_the_netlist() {
    let net = buoy();
    let text = "create_power_domain A -elements [find_objects u_link -pattern u_finger* -object_type inst -transitive]\n";
    let source = Source::from_text("a.upf", text);
    let intent =
        read_intent(std::slice::from_ref(&source), &IntentOptions::default().design(&net)).expect("good");
    assert_eq!(intent.domains[0].elements.len(), 8);
    assert_eq!(intent.domains[0].elements[3].path, "u_link/u_finger3");
    let e = read_intent(&[source], &IntentOptions::default()).expect_err("no netlist");
    assert!(e.to_string().starts_with("a.upf:1:34: `find_objects` without a netlist"), "{e}");
}

#[test]
fn what_does_not_fit_the_netlist_is_named_with_the_nearest() {
    let net = buoy();
    let nets = "create_supply_net VDD\ncreate_supply_net VSS\ncreate_supply_net VX\n";
    let supplied = "set_domain_supply_net A -primary_power_net VX -primary_ground_net VSS\n";
    let switch = |control: &str| {
        format!(
            "create_power_domain A -elements u_dsp\n{nets}{supplied}create_power_switch s -domain A \
             -input_supply_port {{in VDD}} -output_supply_port {{out VX}} -control_port {{c {control}}} -on_state {{on in c}}\n"
        )
    };
    for (text, wanted) in [
        (
            "create_power_domain A -elements {u_dsp u_lnik}\n".to_owned(),
            "x.upf:1:40: element of the power domain `u_lnik` is not defined; did you mean `u_link`?",
        ),
        (
            "create_power_domain A -elements {\n  u_dsp/u_contrl/u3\n}\n".to_owned(),
            "x.upf:2:3: element of the power domain `u_dsp/u_contrl/u3` is not defined; did you mean `u_dsp/u_control/u3`?",
        ),
        (
            "create_power_domain A -include_scope -exclude_elements u_key\n".to_owned(),
            "x.upf:1:56: element left out of the power domain `u_key`",
        ),
        (
            "create_power_domain A -elements {u_dsp}\ncreate_power_domain B -elements {u_link u_dsp}\n"
                .to_owned(),
            "x.upf:2:41: `u_dsp` is in two power domains: `A` (x.upf:1:21) and `B`; want each instance listed in one",
        ),
        (
            "create_power_domain A -include_scope\ncreate_power_domain B -elements .\n".to_owned(),
            "x.upf:2:33: `the top` is in two power domains",
        ),
        (switch("u_dsp/rum"), "x.upf:6:107: net `u_dsp/rum` is not defined; did you mean `u_dsp/run`?"),
        (switch("wake[7]"), "x.upf:6:107: net `wake[7]` is not defined; did you mean `wake["),
        (
            "set_scope u_dps\ncreate_power_domain A\n".to_owned(),
            "x.upf:1:11: scope `u_dps` is not defined; did you mean `u_dsp`?",
        ),
        (
            format!(
                "create_power_domain A -elements u_dsp\n{nets}set_domain_supply_net A -primary_power_net VDD -primary_ground_net VDD\n"
            ),
            "x.upf:1:21: `VDD` is power and ground of power domain `A`",
        ),
        (
            format!(
                "create_power_domain A -elements u_dsp\n{nets}{supplied}create_supply_set S -function {{power VDD}}\n\
                 associate_supply_set S -handle A.primary\n"
            ),
            "x.upf:1:21: two primary power nets for power domain `A`: `VX` and `VDD`; want one",
        ),
    ] {
        let intent = read_intent(&[Source::from_text("x.upf", &text)], &IntentOptions::default());
        let e = intent.and_then(|i| resolve(&i, &net)).expect_err(&text).to_string();
        assert!(e.starts_with(wanted), "{text}\n got {e}\nwant {wanted}");
    }
    let pins = resolve(
        &read_intent(&[Source::from_text("x.upf", &switch("u_keeper/u2/Y"))], &IntentOptions::default())
            .expect("good"),
        &net,
    );
    assert_eq!(pins.expect("a pin").domains[0].headers[0].controls[0].net, net.net("wake[0]"));
}

#[test]
fn files_load_files_and_not_themselves() {
    let folder = std::env::temp_dir().join(format!("hushrail-intent-{}", std::process::id()));
    std::fs::create_dir_all(&folder).expect("a folder");
    let write = |name: &str, text: &str| std::fs::write(folder.join(name), text).expect("written");
    write("self.upf", "create_power_domain A\nload_upf self.upf\n");
    write("a.upf", "load_upf b.upf\n");
    write("b.upf", "source a.upf\n");
    write("none.upf", "load_upf nowhere.upf -scope u_a\n");
    write("inner.upf", "create_power_domain B -elements u_b\nset_scope /\n");
    write(
        "good.upf",
        "load_upf inner.upf -scope u_a\ncreate_power_domain A\nload_upf inner.upf -scope u_c\n",
    );
    let read = |name: &str| {
        Source::open(&folder.join(name)).and_then(|s| read_intent(&[s], &IntentOptions::default()))
    };
    let e =
        |name: &str| read(name).expect_err(name).to_string().replace(&format!("{}/", folder.display()), "");
    assert_eq!(
        e("self.upf"),
        "self.upf:2:10: `self.upf` is being read already; want a file that does not load itself"
    );
    assert!(e("a.upf").starts_with("b.upf:1:8: `a.upf` is being read already"), "{}", e("a.upf"));
    assert!(
        e("none.upf").starts_with("none.upf:1:10: `nowhere.upf` cannot be read: no such file"),
        "{}",
        e("none.upf")
    );
    let good = read("good.upf").expect("good");
    let names: Vec<_> = good.domains.iter().map(|d| (d.name.as_str(), d.scope.as_str())).collect();
    assert_eq!(names, [("u_a/B", "u_a"), ("A", ""), ("u_c/B", "u_c")]);
    assert_eq!(good.domains[0].elements[0].path, "u_a/u_b");
    std::fs::remove_dir_all(&folder).expect("removed");
}

#[test]
fn a_study_takes_its_domains_from_the_intent() {
    let upf = here("tests/data/buoy_hub.upf");
    let text = format!(
        r#"
[process.tt]
files = ["cards/kelp40.lib"]
section = "tt"
[cells]
netlists = ["cells.spice"]
[cells.rails]
supply = ["VDD"]
ground = ["VSS"]
nwell = ["VNW"]
pwell = ["VPW"]
[grid]
process = ["tt"]
vdd_v = [1.1]
temp_c = [25]
[intent]
files = [{upf:?}]
verilog = ["buoy_hub.v"]
top = "buoy_hub"
env = {{ BUOY_LINK_ON = "0" }}
[[domain]]
name = "dsp"
intent = "PD_DSP"
[domain.policy]
"FILL_*" = "zero"
[[domain]]
name = "link"
intent = "PD_LINK"
[domain.policy]
"FILL_*" = "zero"
[[domain]]
name = "keeper"
intent = "PD_KEEP"
[domain.policy]
"FILL_*" = "zero"
[[scheme]]
name = "powered"
[[scheme]]
name = "header"
header = {{ model = "psw", width_m = 8e-4, length_m = 8e-8 }}
"#
    );
    let load = |text: &str| {
        let study = read_study(&Source::from_text("s.toml", text))?;
        load_study(&study, "s.toml", &here("../../python/hushrail/demo_data"))
    };
    let loaded = load(&text).expect("good");
    let map = resolve(&buoy_intent(&[]), &buoy()).expect("fits");
    for (d, name) in loaded.domains.iter().zip(["PD_DSP", "PD_LINK", "PD_KEEP"]) {
        let wanted = map.domain(name).expect("there");
        assert_eq!(d.summary.instances, wanted.counts.total());
        assert_eq!(d.intent.as_ref().map(|i| &i.counts), Some(&wanted.counts));
    }
    let against: Vec<_> =
        loaded.notes.iter().filter(|n| n.code == "scheme-against-intent").map(|n| n.text.as_str()).collect();
    assert_eq!(against.len(), 2, "{against:?}");
    assert!(
        against[0]
            .starts_with("scheme `header` gives domain `link` a header; the intent's switch `link_footer` (")
    );
    assert_eq!(
        against[1],
        "scheme `header` switches domain `keeper`, which the intent's `PD_KEEP` leaves always on"
    );
    for (from, to, wanted) in [
        (
            "\"PD_DSP\"",
            "\"PD_DPS\"",
            "s.toml:1:1: power domain `PD_DPS` is not defined; did you mean `PD_DSP`?",
        ),
        ("verilog = [\"buoy_hub.v\"]", "", "no netlist for domain `dsp` of the power intent"),
        ("intent = \"PD_DSP\"", "intent = \"PD_DSP\"\npath = \"u_dsp\"", "has `intent` beside"),
        ("env = { ", "evn = { ", "key `evn` is not defined; did you mean `env`?"),
    ] {
        let e = load(&text.replace(from, to)).expect_err(to).to_string();
        assert!(e.contains(wanted), "{to}: {e}");
    }
}
