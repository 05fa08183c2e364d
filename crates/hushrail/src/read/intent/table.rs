//! The commands of IEEE 1801 and their options, and how a command is taken apart by them.
//!
//! An option stands as `name` (a flag), `name=` (with a value) or `name=?` (with a value that may be left out), behind
//! it `*` when it may be repeated, `!` when it must be there, `@2.1` the version it came with, before it `+` when its
//! meaning is used here. `state=#` takes one value, or a name and a value.

use super::super::source::{ReadError, nearest};
use super::super::tcl::{Interpreter, Spot, Stop, Word};

/// What is done with a command.
#[derive(Debug, Clone, Copy, PartialEq, Eq)]
pub(super) enum Use {
    /// It is understood.
    Taken,
    /// It is known and has no bearing on this job.
    Noted,
}

#[derive(Debug)]
pub(super) struct Command {
    pub(super) name: &'static str,
    pub(super) usage: Use,
    /// Fewest and most words that are no options.
    words: (usize, usize),
    options: &'static str,
}

const fn taken(name: &'static str, words: (usize, usize), options: &'static str) -> Command {
    Command { name, usage: Use::Taken, words, options }
}

const fn noted(name: &'static str, words: (usize, usize), options: &'static str) -> Command {
    Command { name, usage: Use::Noted, words, options }
}

const ANY: usize = usize::MAX;

/// Every command, those in wide use beyond the standard among them.
pub(super) const COMMANDS: &[Command] = &[
    taken("upf_version", (0, 1), ""),
    taken("set_scope", (0, 1), ""),
    taken("load_upf", (1, 1), "+scope= hide_globals@2.0 parameters=*@3.0 strip_path= version="),
    taken("load_upf_protected", (1, 1), "+scope= hide_globals params= parameters=*"),
    taken("set_design_top", (1, 1), ""),
    taken(
        "create_power_domain",
        (1, 1),
        "+elements= +exclude_elements=@2.0 +include_scope +supply=*@2.0 +scope= +update@2.0 atomic@2.1 subdomains=@2.1 \
         available_supplies=@2.1 boundary_supplies=@3.0 define_func_type=*@2.0 simulation_only@2.0",
    ),
    taken("create_supply_port", (1, 1), "+domain= +direction= "),
    taken("create_supply_net", (1, 1), "+domain= +reuse +resolve="),
    taken("create_supply_set", (1, 1), "+function=* +update reference_gnd="),
    taken("connect_supply_net", (1, 1), "+ports= pg_type=* vct= pins= cells= domain= rail_connection="),
    taken("connect_supply_set", (1, 1), "connect=* elements= exclude_elements= transitive=?"),
    taken("associate_supply_set", (1, 1), "+handle=!"),
    taken("set_domain_supply_net", (1, 1), "+primary_power_net=! +primary_ground_net=!"),
    taken("create_logic_net", (1, 1), ""),
    taken("create_logic_port", (1, 1), "direction="),
    taken("connect_logic_net", (1, 1), "ports= reconnect@3.0"),
    taken(
        "create_power_switch",
        (1, 1),
        "+output_supply_port= +input_supply_port=* +control_port=* +on_state=* +off_state=* +on_partial_state=* \
         +error_state=* +ack_port=* ack_delay=* +supply_set= +domain= +instances= +update@2.1 switch_type=@2.1",
    ),
    taken(
        "set_isolation",
        (1, 1),
        "+domain=! +elements= +exclude_elements= +applies_to= +clamp_value= +isolation_signal= +isolation_sense= \
         +location= +source= +sink= +no_isolation +isolation_supply_set= +isolation_supply=@3.0 \
         +isolation_power_net= +isolation_ground_net= +instance=* +update force_isolation diff_supply_only=? \
         use_equivalence=? use_functional_equivalence=? name_prefix= name_suffix= transitive=? sink_off_clamp= \
         source_off_clamp= async_set_reset= async_clamp_value= applies_to_clamp= applies_to_sink_off_clamp= \
         applies_to_source_off_clamp= applies_to_boundary=@3.0",
    ),
    taken("set_isolation_control", (1, 1), "+domain=! +isolation_signal=! +isolation_sense= +location="),
    taken(
        "set_retention",
        (1, 1),
        "+domain=! +elements= +exclude_elements= +retention_power_net= +retention_ground_net= \
         +retention_supply_set= +retention_supply=@3.0 +no_retention +save_signal= +restore_signal= +save_condition= \
         +restore_condition= +retention_condition= +update use_retention_as_primary parameters= instance=* \
         transitive=? applies_to=@3.1",
    ),
    taken(
        "set_retention_control",
        (1, 1),
        "+domain=! +save_signal=! +restore_signal=! assert_r_mutex=* assert_s_mutex=* assert_rs_mutex=*",
    ),
    taken(
        "set_level_shifter",
        (1, 1),
        "+domain=! +elements= +exclude_elements= +applies_to= +rule= +location= +threshold= +no_shift +update \
         force_shift source= sink= name_prefix= name_suffix= input_supply_set= output_supply_set= \
         internal_supply_set= input_supply= output_supply= internal_supply= use_equivalence=? \
         use_functional_equivalence=? instance=* transitive=? applies_to_boundary=@3.0",
    ),
    taken("add_port_state", (1, 1), "+state=*!"),
    taken("add_supply_state", (1, 1), "+state=*!@3.0"),
    taken("create_pst", (1, 1), "+supplies=!"),
    taken("add_pst_state", (1, 1), "+pst=! +state=!"),
    taken(
        "add_power_state",
        (1, 2),
        "+state=# +update complete supply domain group model instance logic_expr= supply_expr= simstate= legal illegal",
    ),
    taken(
        "find_objects",
        (1, 1),
        "+pattern=! +object_type= direction= +transitive=? +regexp +exact ignore_case leaf_only non_leaf \
         traverse_macros=?",
    ),
    noted("create_composite_domain", (1, 1), "subdomains= supply=* update"),
    noted("merge_power_domains", (1, 1), "power_domains= scope= all"),
    noted("set_related_supply_net", (0, 1), "object_list= power= ground= reset"),
    noted("set_pin_related_supply", (1, 1), "pins= related_power_pin= related_ground_pin="),
    noted("set_equivalent", (0, 0), "function_only nets= sets="),
    noted(
        "set_port_attributes",
        (0, ANY),
        "model= models= elements= exclude_elements= ports= exclude_ports= domains= applies_to= exclude_domains= \
         attribute=* clamp_value= sink_off_clamp= source_off_clamp= driver_supply= receiver_supply= related_supply= \
         literal_supply= related_power_port= related_ground_port= related_bias_ports= repeater_supply= pg_type= \
         unconnected feedthrough is_analog is_isolated transitive=? driver_supply_set= receiver_supply_set=",
    ),
    noted(
        "set_design_attributes",
        (0, 0),
        "models= elements= exclude_elements= attribute=* transitive=? is_leaf_cell=? is_macro_cell=? is_soft_macro=? \
         is_hard_macro=? is_power_aware_model=? switch_type= is_refinement_macro=?",
    ),
    noted("set_simstate_behavior", (1, 1), "lib= model= models= elements= exclude_elements= simstate_port="),
    noted("load_simstate_behavior", (1, 1), "file="),
    noted(
        "set_repeater",
        (1, 1),
        "domain= elements= exclude_elements= applies_to= repeater_supply= repeater_supply_set= source= sink= \
         use_equivalence=? name_prefix= name_suffix= instance=* update applies_to_boundary=",
    ),
    noted(
        "set_retention_elements",
        (1, 1),
        "elements= exclude_elements= applies_to= retention_purpose= transitive=? expand=? update",
    ),
    noted("set_correlated", (0, 0), "nets= sets="),
    noted("set_variation", (0, 0), "supply= range="),
    noted("set_partial_on_translation", (1, 1), "full_on_tools= off_tools="),
    noted(
        "set_power_switch",
        (1, 1),
        "output_supply_port= input_supply_port=* control_port=* on_state=* off_state=*",
    ),
    noted("map_power_switch", (1, 1), "domain= lib_cells= port_map="),
    noted(
        "map_isolation_cell",
        (1, 1),
        "domain= elements= lib_cells= lib_cell_type= lib_model_name= port=* port_map=",
    ),
    noted("map_level_shifter_cell", (1, 1), "domain= elements= lib_cells="),
    noted(
        "map_retention_cell",
        (1, 1),
        "domain= elements= exclude_elements= lib_cells= lib_cell_type= lib_model_name= port_map= port=*",
    ),
    noted("map_retention_clamp_cell", (1, 1), "domain= elements= exclude_elements= lib_cells="),
    noted("map_repeater_cell", (1, 1), "domain= elements= exclude_elements= lib_cells="),
    noted(
        "use_interface_cell",
        (1, 1),
        "strategy= domain= lib_cells= port_map= elements= exclude_elements= applies_to_clamp= update_any= force_function inverter_supply_set=",
    ),
    noted(
        "add_state_transition",
        (1, 2),
        "transition=* from= to= paired= legal illegal update complete supply domain group model instance",
    ),
    noted("describe_state_transition", (1, 1), "object= from= to= paired= legal illegal"),
    noted("create_power_state_group", (1, 1), ""),
    noted("add_parameter", (1, 2), "type= default= description= buildtime runtime rtpg"),
    noted("begin_power_model", (1, 1), "for="),
    noted("end_power_model", (0, 0), ""),
    noted("define_power_model", (1, 2), "for="),
    noted("apply_power_model", (1, 1), "elements= supply_map= port_map= parameters="),
    noted("bind_checker", (1, 1), "module= elements= bind_to= ports= parameters= arch="),
    noted("create_hdl2upf_vct", (1, 1), "hdl_type= table="),
    noted("create_upf2hdl_vct", (1, 1), "hdl_type= table="),
    noted("create_upf_library", (1, 1), "contents="),
    noted("use_upf_library", (1, 1), "library="),
    noted(
        "create_assertion_control",
        (1, 1),
        "elements= exclude_elements= domain= control_expr= type= transitive=?",
    ),
    noted("create_abstract_power_source", (1, 1), "output_supply_port= input_supply_port=* control_port=*"),
    noted("create_upf_bind", (1, ANY), ""),
    noted(
        "sim_assertion_control",
        (0, 1),
        "elements= exclude_elements= domain= model= transitive=? controlling_domain= type=",
    ),
    noted("sim_corruption_control", (0, 1), "elements= exclude_elements= domain= model= transitive=? type="),
    noted(
        "sim_replay_control",
        (0, 1),
        "elements= exclude_elements= domain= model= transitive=? controlling_domain=",
    ),
    noted(
        "name_format",
        (0, 0),
        "isolation_prefix= isolation_suffix= level_shift_prefix= level_shift_suffix= implicit_supply_suffix= implicit_logic_prefix= implicit_logic_suffix=",
    ),
    noted("save_upf", (1, 1), "scope= version="),
    noted("upf_query_object_properties", (1, 1), "property="),
    noted("set_operating_conditions", (0, ANY), "object_list= analysis_type= library="),
    noted("set_voltage", (1, 1), "object_list= min="),
];

/// One option of a command.
#[derive(Debug, Clone, Copy, PartialEq)]
struct Opt {
    name: &'static str,
    values: Values,
    repeats: bool,
    required: bool,
    used: bool,
    since: f64,
}

#[derive(Debug, Clone, Copy, PartialEq, Eq)]
enum Values {
    None,
    One,
    Maybe,
    OneOrTwo,
}

fn options(command: &Command) -> impl Iterator<Item = Opt> + use<> {
    command.options.split_whitespace().map(|text| {
        let (text, since) = text.split_once('@').unwrap_or((text, "1.0"));
        let (used, text) = text.strip_prefix('+').map_or((false, text), |t| (true, t));
        let end = text.find(['=', '*', '!']).unwrap_or(text.len());
        let (name, marks) = text.split_at(end);
        let values = match (marks.contains('='), marks.contains('?'), marks.contains('#')) {
            (false, ..) => Values::None,
            (_, true, _) => Values::Maybe,
            (_, _, true) => Values::OneOrTwo,
            _ => Values::One,
        };
        Opt {
            name,
            values,
            repeats: marks.contains('*') || values == Values::OneOrTwo,
            required: marks.contains('!'),
            used,
            since: since.parse().unwrap_or(1.0),
        }
    })
}

/// A command taken apart.
#[derive(Debug)]
pub(super) struct Args {
    pub(super) at: Spot,
    pub(super) words: Vec<Word>,
    given: Vec<(&'static str, Spot, Vec<Word>)>,
}

impl Args {
    /// Whether an option is there.
    pub(super) fn has(&self, name: &str) -> bool {
        self.given.iter().any(|g| g.0 == name)
    }

    /// Where an option stands.
    pub(super) fn spot(&self, name: &str) -> Spot {
        self.given.iter().find(|g| g.0 == name).map_or(self.at, |g| g.1)
    }

    /// The value of an option.
    pub(super) fn word(&self, name: &str) -> Option<&Word> {
        self.given.iter().find(|g| g.0 == name).and_then(|g| g.2.first())
    }

    /// The values of an option that may be repeated.
    pub(super) fn each<'a>(&'a self, name: &'a str) -> impl Iterator<Item = &'a Word> {
        self.given.iter().filter(move |g| g.0 == name).filter_map(|g| g.2.first())
    }

    /// The same with all words of each.
    pub(super) fn groups<'a>(&'a self, name: &'a str) -> impl Iterator<Item = &'a [Word]> {
        self.given.iter().filter(move |g| g.0 == name).map(|g| g.2.as_slice())
    }

    /// Whether an option with a value that may be left out is on.
    pub(super) fn is_on(&self, name: &str) -> bool {
        self.given.iter().find(|g| g.0 == name).is_some_and(|g| {
            !g.2.first().is_some_and(|w| w.text().eq_ignore_ascii_case("false") || w.text() == "0")
        })
    }
}

fn is_option(text: &str) -> bool {
    let name = text.strip_prefix('-').filter(|t| !t.contains(char::is_whitespace));
    name.is_some_and(|t| t.starts_with(|c: char| c.is_ascii_alphabetic() || c == '_'))
}

/// Takes a command apart by its options.
pub(super) fn take_apart(
    tcl: &mut Interpreter,
    command: &Command,
    words: &[Word],
    version: Option<f64>,
) -> Result<Args, Stop> {
    let known: Vec<Opt> = options(command).collect();
    let at = words.first().map_or_else(Spot::default, |w| w.at);
    let mut args = Args { at, words: Vec::new(), given: Vec::new() };
    let mut rest = words.iter().skip(1).peekable();
    while let Some(word) = rest.next() {
        if word.text().trim().is_empty() && !word.text().is_empty() {
            return Err(tcl.wrong(
                word.at,
                "a word of blanks",
                "a backslash goes on with the line only where nothing stands behind it; remove the blanks",
            ));
        }
        if !is_option(word.text()) {
            if args.words.len() == command.words.1 {
                let found = format!("`{}` is one word too many for `{}`", cut(word.text()), command.name);
                return Err(tcl.wrong(word.at, found, "want an option, or braces around a list"));
            }
            args.words.push(word.clone());
            continue;
        }
        let name = &word.text()[1..];
        let Some(option) = known.iter().find(|o| o.name == name) else {
            return Err(unknown_option(tcl, word, &known));
        };
        if !option.repeats && args.has(name) {
            let found = format!("`-{name}` stands twice in `{}`", command.name);
            return Err(tcl.wrong(word.at, found, "want it once"));
        }
        if version.is_some_and(|v| option.since > v) {
            let text = format!("`-{name}` of `{}` came with version {:.1}", command.name, option.since);
            tcl.note("option-of-later-version", word.at, &text);
        }
        if !option.used && command.usage == Use::Taken {
            tcl.note(
                "option-without-use",
                word.at,
                &format!("`-{name}` of `{}` is read and has no use here", command.name),
            );
        }
        let follows = |w: &&Word| !known.iter().any(|o| w.text().strip_prefix('-') == Some(o.name));
        let mut values = Vec::new();
        match option.values {
            Values::None => {}
            Values::Maybe => {
                let flag =
                    |w: &&Word| ["true", "false", "0", "1"].contains(&w.text().to_ascii_lowercase().as_str());
                values.extend(rest.next_if(flag).cloned());
            }
            Values::One | Values::OneOrTwo => {
                let Some(value) = rest.next_if(follows) else {
                    let found = format!("`-{name}` of `{}` without its value", command.name);
                    return Err(tcl.wrong(word.at, found, "want a value behind it"));
                };
                values.push(value.clone());
                if option.values == Values::OneOrTwo && tcl.list(&value.value)?.len() == 1 {
                    values.extend(rest.next_if(|w| !is_option(w.text())).cloned());
                }
            }
        }
        args.given.push((option.name, word.at, values));
    }
    if args.words.len() < command.words.0 {
        let found = format!("`{}` without its name", command.name);
        return Err(tcl.wrong(at, found, format!("want `{} name …`", command.name)));
    }
    if let Some(missing) = known.iter().find(|o| o.required && !args.has(o.name)) {
        let found = format!("`{}` without `-{}`", command.name, missing.name);
        return Err(tcl.wrong(at, found, "want it with its value"));
    }
    Ok(args)
}

fn unknown_option(tcl: &Interpreter, word: &Word, known: &[Opt]) -> Stop {
    let names: Vec<String> = known.iter().map(|o| format!("-{}", o.name)).collect();
    let near = nearest(word.text(), names.iter().map(String::as_str))
        .or_else(|| names.iter().find(|n| n.starts_with(word.text())).cloned())
        .or_else(|| (!names.is_empty()).then(|| names.join("`, `")));
    ReadError::Unknown { at: tcl.place(word.at), kind: "option", name: cut(word.text()), nearest: near }
        .into()
}

/// A text cut for a message.
pub(super) fn cut(text: &str) -> String {
    if text.chars().count() <= 60 {
        text.to_owned()
    } else {
        text.chars().take(57).collect::<String>() + "…"
    }
}

#[cfg(test)]
pub(super) fn check(command: &Command) {
    let all: Vec<Opt> = options(command).collect();
    for o in &all {
        assert!(
            o.name.bytes().all(|b| b.is_ascii_alphanumeric() || b == b'_'),
            "{}: {}",
            command.name,
            o.name
        );
        assert_eq!(all.iter().filter(|p| p.name == o.name).count(), 1, "{}: {}", command.name, o.name);
        assert!((1.0..=3.1).contains(&o.since));
    }
}
