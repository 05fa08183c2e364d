//! Devices described in a study file: each kind read, made, and every mistake named.

use std::path::{Path, PathBuf};
use std::sync::Arc;

use hushrail::device::compact::CompactCard;
use hushrail::device::spec::{DeviceModel, DeviceSpec};
use hushrail::device::{Bias, Geometry, Polarity};
use hushrail::physics::Kelvin;
use hushrail::read::Place;

fn scratch(name: &str, text: &str) -> PathBuf {
    let dir = std::env::temp_dir().join(format!("hushrail-spec-{}", std::process::id()));
    std::fs::create_dir_all(&dir).expect("scratch folder");
    std::fs::write(dir.join(name), text).expect("scratch file");
    dir
}

fn spec(text: &str) -> DeviceSpec {
    toml::from_str(text).expect("a device")
}

fn load(text: &str, folder: &Path) -> Result<DeviceModel, String> {
    spec(text).load(folder, &Place::new(&Arc::from("s.toml"), 7, 1)).map_err(|e| e.to_string())
}

/// Two gate and two drain voltages of a device that is ten times as strong on as off.
const POINTS: &str = "vg_v,vd_v,vb_v,temp_c,id_a,ig_a,ib_a
0,0,0,25,0,0,0
0,1,0,25,1.0e-9,0,0
1,0,0,25,0,0,0
1,1,0,25,1.0e-8,0,0
";

#[test]
fn each_kind_is_made() {
    let temp = Kelvin::from_celsius(25.0).expect("in range");
    let g = Geometry::new(2e-6, 65e-9);
    let b = Bias { vgs: 0.0, vds: 1.0, vbs: 0.0 };
    let folder = scratch("points.csv", POINTS);

    let generic = spec("generic = \"generic 65 nm n\"").make(&folder, &g, temp).expect("generic");
    let card = CompactCard::generic("generic 65 nm n").expect("known");
    let text = format!("compact = {}", toml::Value::try_from(&card).expect("value"));
    let compact = spec(&text).make(&folder, &g, temp).expect("compact");
    assert_eq!(generic.branches(b), compact.branches(b));

    let table = "table = \"points.csv\"\nwidth_m = 1e-6\npolarity = \"n\"\noxide_m = 2e-9";
    let made = spec(table).make(&folder, &g, temp).expect("table");
    assert!((made.branches(b).channel_ds / 2e-9 - 1.0).abs() < 1e-12, "twice the width");
    assert_eq!(load(table, &folder).expect("table").polarity(), Polarity::N);
    let again = spec(&toml::to_string(&spec(table)).expect("text"));
    assert_eq!(again, spec(table));
}

#[test]
fn mistakes_are_named() {
    let folder = scratch("wrong.csv", &POINTS.replace("1.0e-8", "x"));
    let table = "table = \"wrong.csv\"\nwidth_m = 1e-6\npolarity = \"n\"\noxide_m = 2e-9";
    for (text, wanted) in [
        ("", "s.toml:7:1: the device names no model; want one of `compact`, `generic`, `table`"),
        ("generic = \"x\"\ntable = \"y\"", "s.toml:7:1: the device names 2 models: `generic`, `table`"),
        (
            "generic = \"generic 65 nm\"",
            "s.toml:7:1: generic device `generic 65 nm` is not defined; did you mean `generic 65 nm n`?",
        ),
        (
            "generic = \"generic 65 nm n\"\nwidth_m = 1e-6",
            "`width_m` stands beside `generic`; it belongs to `table`",
        ),
        ("table = \"wrong.csv\"", "the table `wrong.csv` has no `polarity`; want `n` or `p`"),
        (
            "table = \"wrong.csv\"\npolarity = \"p\"",
            "has no `width_m`; want the width of its transistor in metres",
        ),
        ("table = \"wrong.csv\"\npolarity = \"p\"\nwidth_m = 1e-6", "has no `oxide_m`"),
        (&table.replace("wrong", "absent"), "absent.csv: cannot be read: no such file"),
        (table, "wrong.csv:5:1: `id_a` is `x`; want a finite number"),
    ] {
        let e = load(text, &folder).expect_err(text);
        assert!(e.contains(wanted), "{e}\nlacks {wanted}");
    }
    for (text, wanted) in [
        ("tabel = \"x\"", "unknown field `tabel`"),
        ("polarity = \"nmos\"", "unknown variant `nmos`, expected `n` or `p`"),
        ("compact = { polarity = \"n\" }", "missing field `vt0_v`"),
    ] {
        let e = toml::from_str::<DeviceSpec>(text).expect_err(text).to_string();
        assert!(e.contains(wanted), "{e}");
    }
    // out of range inside the card, and at the device
    let card = CompactCard { dibl_v_v: 80.0, ..CompactCard::generic("generic 65 nm n").expect("known") };
    let bad = DeviceSpec { compact: Some(card), ..DeviceSpec::default() };
    let e = bad.load(&folder, &Place::new(&Arc::from("s.toml"), 7, 1)).expect_err("range").to_string();
    assert!(e.contains("s.toml:7:1: `dibl_v_v` is 80.0 V/V; want 0.0 to 0.5 V/V"), "{e}");
    let model = load("generic = \"generic 65 nm n\"", &folder).expect("good");
    let at = Place::new(&Arc::from("net.sp"), 3, 5);
    let temp = Kelvin::from_celsius(25.0).expect("in range");
    let e = model.make(&Geometry::new(-1.0, 65e-9), temp, &at).expect_err("size").to_string();
    assert!(e.contains("net.sp:3:5: `width` is -1.0 m"), "{e}");
}
