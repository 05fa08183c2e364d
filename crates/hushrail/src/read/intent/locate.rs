//! Finding what intent names in a netlist.

use std::collections::BTreeSet;

use super::super::source::{ReadError, nearest};
use super::super::verilog::connect::{Connected, InstanceId, NetId};
use super::model::Named;

/// Whether a path is the top or a module instance.
pub(super) fn is_module_instance(net: &Connected, path: &str) -> bool {
    path.is_empty() || net.instances_under(path).is_some()
}

/// Whether there is anything at a path.
pub(super) fn is_instance(net: &Connected, path: &str) -> bool {
    net.instance(path).is_some() || is_module_instance(net, path)
}

/// The leaf cells at or under a path.
pub(super) fn leaves(net: &Connected, path: &str) -> Option<Vec<InstanceId>> {
    net.instance(path).map(|i| vec![i]).or_else(|| net.instances_under(path))
}

/// The net at a path, or at the pin of a leaf cell.
pub(super) fn net_at(net: &Connected, path: &str) -> Option<NetId> {
    if let Some(found) = net.net(path) {
        return Some(found);
    }
    let cut = path.rfind(['/', '.'])?;
    let instance = net.instance(&path[..cut])?;
    let pin = &path[cut + 1..];
    let (name, bit) = match pin.strip_suffix(']').and_then(|p| p.split_once('[')) {
        Some((name, bit)) => (name, bit.parse::<usize>().ok()?),
        None => (pin, 0),
    };
    let port = net.ports_of(net.master(instance)).find(|p| p.name == name || p.name == pin)?;
    let place = if port.name == pin { 0 } else { bit };
    (place < port.width).then(|| net.pins(instance).get(port.first + place).copied())?
}

/// The error for an instance that is not there, with the nearest that is.
pub(super) fn instance_error(net: &Connected, named: &Named, kind: &'static str) -> ReadError {
    let all = net.module_instances().chain(net.instances().map(|i| net.instance_path(i)));
    missing(named, kind, all)
}

/// The error for a net that is not there, with the nearest that is.
pub(super) fn net_error(net: &Connected, named: &Named) -> ReadError {
    let (parent, start) = named.path.rsplit_once('/').map_or(("", 0), |(p, _)| (p, p.len() + 1));
    match net.nets_in(parent) {
        Some(names) => missing(named, "net", names.iter().map(|n| format!("{}{n}", &named.path[..start]))),
        None => missing(named, "net", net.module_instances()),
    }
}

/// Looks where the path leaves what is there, and names what comes nearest from there on.
fn missing(named: &Named, kind: &'static str, all: impl Iterator<Item = String>) -> ReadError {
    let wanted = named.path.as_str();
    // the longest part of the path that something begins with, and the names that follow there
    let mut deepest = 0;
    let mut follow: BTreeSet<String> = BTreeSet::new();
    for path in all {
        let common = shared(wanted, &path);
        if common > deepest {
            deepest = common;
            follow.clear();
        }
        if common == deepest {
            let rest = &path[common..];
            follow.insert(rest.split('/').next().unwrap_or(rest).to_owned());
        }
    }
    let rest = wanted.get(deepest..).unwrap_or(wanted);
    let (name, tail) = rest.split_once('/').map_or((rest, ""), |(n, t)| (n, t));
    let near = nearest(name, follow.iter().map(String::as_str)).map(|n| {
        let end = if tail.is_empty() { String::new() } else { format!("/{tail}") };
        format!("{}{n}{end}", &wanted[..deepest])
    });
    ReadError::Unknown { at: named.at.clone(), kind, name: super::cut(wanted), nearest: near }
}

/// How many bytes of whole names, with the separator, two paths share.
fn shared(a: &str, b: &str) -> usize {
    let mut whole = 0;
    for (i, (x, y)) in a.bytes().zip(b.bytes()).enumerate() {
        if x != y {
            break;
        }
        if x == b'/' {
            whole = i + 1;
        }
    }
    whole
}
