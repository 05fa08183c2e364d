//! The reserved words of the language and what each begins.

/// What a keyword begins or is good for.
#[derive(Debug, Clone, Copy, PartialEq, Eq)]
pub(super) enum Keyword {
    /// Nets, variables, parameters, ports: holds no instance.
    Declaration,
    Assign,
    /// A gate or switch primitive.
    Gate,
    /// A net type as the first word of a statement, a drive strength inside parentheses.
    Supply,
    Strength,
    Module,
    EndModule,
    /// Begins something that is not structure.
    Behaviour,
    /// Has a meaning inside statements only.
    Inner,
}

/// Keywords of IEEE 1364-2005, annex B, less those of configurations, which have no meaning inside modules.
pub(super) fn keyword(word: &str) -> Option<Keyword> {
    // most names show at their ends that they are none
    let bytes = word.as_bytes();
    match (bytes.first(), bytes.last()) {
        (Some(b'a'..=b'z'), Some(b'a'..=b'z' | b'0' | b'1')) => {}
        _ => return None,
    }
    Some(match word {
        "input" | "output" | "inout" | "wire" | "logic" | "tri" | "tri0" | "tri1" | "triand" | "trior"
        | "trireg" | "uwire" | "wand" | "wor" | "reg" | "integer" | "real" | "realtime" | "time"
        | "event" | "genvar" | "parameter" | "localparam" | "specparam" | "defparam" => Keyword::Declaration,
        "supply0" | "supply1" => Keyword::Supply,
        "assign" => Keyword::Assign,
        "and" | "nand" | "or" | "nor" | "xor" | "xnor" | "buf" | "not" | "bufif0" | "bufif1" | "notif0"
        | "notif1" | "nmos" | "pmos" | "rnmos" | "rpmos" | "cmos" | "rcmos" | "tran" | "rtran"
        | "tranif0" | "tranif1" | "rtranif0" | "rtranif1" | "pullup" | "pulldown" => Keyword::Gate,
        "strong0" | "strong1" | "pull0" | "pull1" | "weak0" | "weak1" | "highz0" | "highz1" => {
            Keyword::Strength
        }
        "module" | "macromodule" => Keyword::Module,
        "endmodule" => Keyword::EndModule,
        "always" | "initial" | "task" | "function" | "generate" | "specify" | "for" | "if" | "case"
        | "casex" | "casez" | "while" | "repeat" | "forever" | "begin" | "fork" | "primitive" | "table"
        | "wait" | "disable" | "deassign" | "force" | "release" | "config" | "library" => Keyword::Behaviour,
        "automatic"
        | "default"
        | "edge"
        | "else"
        | "end"
        | "endcase"
        | "endconfig"
        | "endfunction"
        | "endgenerate"
        | "endprimitive"
        | "endspecify"
        | "endtable"
        | "endtask"
        | "ifnone"
        | "join"
        | "large"
        | "medium"
        | "negedge"
        | "noshowcancelled"
        | "posedge"
        | "pulsestyle_ondetect"
        | "pulsestyle_onevent"
        | "scalared"
        | "showcancelled"
        | "signed"
        | "small"
        | "unsigned"
        | "vectored" => Keyword::Inner,
        _ => return None,
    })
}
