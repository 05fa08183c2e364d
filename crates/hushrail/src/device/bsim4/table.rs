//! Every parameter of the published BSIM4 manual: one row each, from which parsing, binning, defaults and the
//! list of supported parameters all follow.
//!
//! Names, units and defaults: BSIM4.8.0 MOSFET Model User's Manual, Appendix A (UC Berkeley, 2013), and the tables of
//! versions 4.3 to 4.7 where a parameter is older.

/// How a parameter enters.
#[derive(Debug, Clone, Copy, PartialEq, Eq)]
pub enum Kind {
    /// A whole-number selector.
    Flag,
    /// One value.
    Plain,
    /// A value with length, width and product terms (`lP`, `wP`, `pP`).
    Binned,
}

/// What a parameter is when the card does not give it.
#[derive(Debug, Clone, Copy, PartialEq)]
pub enum Fallback {
    /// This number.
    Value(f64),
    /// This number for n-channel, that for p-channel.
    ByType(f64, f64),
    /// The value of another parameter.
    Same(Id),
    /// Worked out from others; see `values.rs`.
    Derived,
}

/// One row of the table.
#[derive(Debug, Clone, Copy, PartialEq)]
pub struct Row {
    /// Name in lower case.
    pub name: &'static str,
    /// How it enters.
    pub kind: Kind,
    /// Its default.
    pub default: Fallback,
    /// Unit as the manual prints it; empty for none.
    pub unit: &'static str,
    /// Section of the manual's appendix, and what it holds.
    pub section: &'static str,
}

macro_rules! parameters {
    ($($section:literal { $($id:ident $name:literal $kind:ident $default:expr, $unit:literal;)* })*) => {
        /// A parameter that bears on static currents.
        #[derive(Debug, Clone, Copy, PartialEq, Eq, Hash)]
        #[expect(missing_docs, reason = "the names are those of the manual; see ROWS")]
        pub enum Id { $($($id,)*)* }

        /// The rows, in the order of [`Id`].
        pub const ROWS: &[Row] = {
            use Fallback::{ByType, Derived, Same, Value};
            use Kind::{Binned, Flag, Plain};
            &[$($(Row { name: $name, kind: $kind, default: $default, unit: $unit, section: $section },)*)*]
        };

        /// All identifiers, in the order of [`ROWS`].
        pub const IDS: &[Id] = &[$($(Id::$id,)*)*];
    };
}

parameters! {
    "A.1, selectors" {
        Level "level" Flag Value(54.0), "";
        Version "version" Plain Value(4.8), "";
        Binunit "binunit" Flag Value(1.0), "";
        Mobmod "mobmod" Flag Value(0.0), "";
        Rdsmod "rdsmod" Flag Value(0.0), "";
        Igcmod "igcmod" Flag Value(0.0), "";
        Igbmod "igbmod" Flag Value(0.0), "";
        Diomod "diomod" Flag Value(1.0), "";
        Permod "permod" Flag Value(1.0), "";
        Geomod "geomod" Flag Value(0.0), "";
        Tempmod "tempmod" Flag Value(0.0), "";
        Gidlmod "gidlmod" Flag Value(0.0), "";
        Mtrlmod "mtrlmod" Flag Value(0.0), "";
        Wpemod "wpemod" Flag Value(0.0), "";
        Rbodymod "rbodymod" Flag Value(0.0), "";
        Rgeomod "rgeomod" Flag Value(0.0), "";
        Mtrlcompatmod "mtrlcompatmod" Flag Value(0.0), "";
    }
    "A.2, process" {
        Epsrox "epsrox" Plain Value(3.9), "";
        Toxe "toxe" Plain Value(3e-9), "m";
        Toxp "toxp" Plain Derived, "m";
        Toxm "toxm" Plain Same(Id::Toxe), "m";
        Dtox "dtox" Plain Value(0.0), "m";
        Xj "xj" Binned Value(1.5e-7), "m";
        Gamma1 "gamma1" Binned Derived, "V^1/2";
        Gamma2 "gamma2" Binned Derived, "V^1/2";
        Ndep "ndep" Binned Value(1.7e17), "cm^-3";
        Nsub "nsub" Binned Value(6e16), "cm^-3";
        Ngate "ngate" Binned Value(0.0), "cm^-3";
        Nsd "nsd" Binned Value(1e20), "cm^-3";
        Vbx "vbx" Binned Derived, "V";
        Xt "xt" Binned Value(1.55e-7), "m";
        Rsh "rsh" Plain Value(0.0), "ohm/square";
        Ados "ados" Plain Value(1.0), "";
        Bdos "bdos" Plain Value(1.0), "";
        Eot "eot" Plain Value(1.5e-9), "m";
        Vddeot "vddeot" Plain ByType(1.5, -1.5), "V";
        Phig "phig" Plain Value(4.05), "V";
        Epsrgate "epsrgate" Plain Value(11.7), "";
        Easub "easub" Plain Value(4.05), "V";
        Epsrsub "epsrsub" Plain Value(11.7), "";
        Ni0sub "ni0sub" Plain Value(1.45e10), "cm^-3";
        Bg0sub "bg0sub" Plain Value(1.16), "eV";
        Tbgasub "tbgasub" Plain Value(7.02e-4), "eV/K";
        Tbgbsub "tbgbsub" Plain Value(1108.0), "K";
        Leffeot "leffeot" Plain Value(1e-6), "m";
        Weffeot "weffeot" Plain Value(1e-5), "m";
        Tempeot "tempeot" Plain Value(300.15), "K";
    }
    "A.3, basic" {
        Vth0 "vth0" Binned ByType(0.7, -0.7), "V";
        Vfb "vfb" Binned Value(-1.0), "V";
        Phin "phin" Binned Value(0.0), "V";
        K1 "k1" Binned Value(0.53), "V^1/2";
        K2 "k2" Binned Value(-0.0186), "";
        K3 "k3" Binned Value(80.0), "";
        K3b "k3b" Binned Value(0.0), "1/V";
        W0 "w0" Binned Value(2.5e-6), "m";
        Lpe0 "lpe0" Binned Value(1.74e-7), "m";
        Lpeb "lpeb" Binned Value(0.0), "m";
        Vbm "vbm" Binned Value(-3.0), "V";
        Dvt0 "dvt0" Binned Value(2.2), "";
        Dvt1 "dvt1" Binned Value(0.53), "";
        Dvt2 "dvt2" Binned Value(-0.032), "1/V";
        Dvtp0 "dvtp0" Binned Value(0.0), "m";
        Dvtp1 "dvtp1" Binned Value(0.0), "1/V";
        Dvtp2 "dvtp2" Binned Value(0.0), "V m^DVTP3";
        Dvtp3 "dvtp3" Binned Value(0.0), "";
        Dvtp4 "dvtp4" Binned Value(0.0), "1/V";
        Dvtp5 "dvtp5" Binned Value(0.0), "V";
        Dvt0w "dvt0w" Binned Value(0.0), "";
        Dvt1w "dvt1w" Binned Value(5.3e6), "1/m";
        Dvt2w "dvt2w" Binned Value(-0.032), "1/V";
        U0 "u0" Binned ByType(0.067, 0.025), "m^2/Vs";
        Ua "ua" Binned Derived, "m/V";
        Ub "ub" Binned Value(1e-19), "m^2/V^2";
        Uc "uc" Binned Derived, "";
        Ud "ud" Binned Value(0.0), "1/m^2";
        Ucs "ucs" Binned ByType(1.67, 1.0), "";
        Up "up" Binned Value(0.0), "1/m^2";
        Lp "lp" Binned Value(1e-8), "m";
        Eu "eu" Binned ByType(1.67, 1.0), "";
        Vtl "vtl" Binned Value(2e5), "m/s";
        Lc "lc" Binned Value(0.0), "m";
        Xn "xn" Binned Value(3.0), "";
        Lambda "lambda" Binned Value(0.0), "";
        Vsat "vsat" Binned Value(8e4), "m/s";
        A0 "a0" Binned Value(1.0), "";
        Ags "ags" Binned Value(0.0), "1/V";
        B0 "b0" Binned Value(0.0), "m";
        B1 "b1" Binned Value(0.0), "m";
        Keta "keta" Binned Value(-0.047), "1/V";
        A1 "a1" Binned Value(0.0), "1/V";
        A2 "a2" Binned Value(1.0), "";
        Wint "wint" Plain Value(0.0), "m";
        Lint "lint" Plain Value(0.0), "m";
        Dwg "dwg" Binned Value(0.0), "m/V";
        Dwb "dwb" Binned Value(0.0), "m/V^1/2";
        Voff "voff" Binned Value(-0.08), "V";
        Voffl "voffl" Plain Value(0.0), "V m";
        Minv "minv" Binned Value(0.0), "";
        Nfactor "nfactor" Binned Value(1.0), "";
        Eta0 "eta0" Binned Value(0.08), "";
        Etab "etab" Binned Value(-0.07), "1/V";
        Dsub "dsub" Binned Same(Id::Drout), "";
        Cit "cit" Binned Value(0.0), "F/m^2";
        Cdsc "cdsc" Binned Value(2.4e-4), "F/m^2";
        Cdscb "cdscb" Binned Value(0.0), "F/Vm^2";
        Cdscd "cdscd" Binned Value(0.0), "F/Vm^2";
        Pclm "pclm" Binned Value(1.3), "";
        Pdiblc1 "pdiblc1" Binned Value(0.39), "";
        Pdiblc2 "pdiblc2" Binned Value(0.0086), "";
        Pdiblcb "pdiblcb" Binned Value(0.0), "1/V";
        Drout "drout" Binned Value(0.56), "";
        Pscbe1 "pscbe1" Binned Value(4.24e8), "V/m";
        Pscbe2 "pscbe2" Binned Value(1e-5), "m/V";
        Pvag "pvag" Binned Value(0.0), "";
        Delta "delta" Binned Value(0.01), "V";
        Fprout "fprout" Binned Value(0.0), "V/m^1/2";
        Pdits "pdits" Binned Value(0.0), "1/V";
        Pditsl "pditsl" Plain Value(0.0), "1/m";
        Pditsd "pditsd" Binned Value(0.0), "1/V";
    }
    "A.4, drain and source resistance" {
        Rdsw "rdsw" Binned Value(200.0), "ohm um^WR";
        Rdswmin "rdswmin" Plain Value(0.0), "ohm um^WR";
        Rdw "rdw" Binned Value(100.0), "ohm um^WR";
        Rdwmin "rdwmin" Plain Value(0.0), "ohm um^WR";
        Rsw "rsw" Binned Value(100.0), "ohm um^WR";
        Rswmin "rswmin" Plain Value(0.0), "ohm um^WR";
        Prwg "prwg" Binned Value(1.0), "1/V";
        Prwb "prwb" Binned Value(0.0), "V^-1/2";
        Wr "wr" Binned Value(1.0), "";
    }
    "A.5, impact ionisation" {
        Alpha0 "alpha0" Binned Value(0.0), "Am/V";
        Alpha1 "alpha1" Binned Value(0.0), "A/V";
        Beta0 "beta0" Binned Value(0.0), "V";
    }
    "A.6, gate-induced drain leakage" {
        Agidl "agidl" Binned Value(0.0), "mho";
        Bgidl "bgidl" Binned Value(2.3e9), "V/m";
        Cgidl "cgidl" Binned Value(0.5), "V^3";
        Egidl "egidl" Binned Value(0.8), "V";
        Rgidl "rgidl" Binned Value(1.0), "";
        Kgidl "kgidl" Binned Value(0.0), "V";
        Fgidl "fgidl" Binned Value(0.0), "V";
        Agisl "agisl" Binned Same(Id::Agidl), "mho";
        Bgisl "bgisl" Binned Same(Id::Bgidl), "V/m";
        Cgisl "cgisl" Binned Same(Id::Cgidl), "V^3";
        Egisl "egisl" Binned Same(Id::Egidl), "V";
        Rgisl "rgisl" Binned Same(Id::Rgidl), "";
        Kgisl "kgisl" Binned Same(Id::Kgidl), "V";
        Fgisl "fgisl" Binned Same(Id::Fgidl), "V";
    }
    "A.7, gate tunnelling" {
        Aigbacc "aigbacc" Binned Value(9.49e-4), "(Fs^2/g)^1/2/m";
        Bigbacc "bigbacc" Binned Value(1.71e-3), "(Fs^2/g)^1/2/mV";
        Cigbacc "cigbacc" Binned Value(0.075), "1/V";
        Nigbacc "nigbacc" Binned Value(1.0), "";
        Aigbinv "aigbinv" Binned Value(1.11e-2), "(Fs^2/g)^1/2/m";
        Bigbinv "bigbinv" Binned Value(9.49e-4), "(Fs^2/g)^1/2/mV";
        Cigbinv "cigbinv" Binned Value(6e-3), "1/V";
        Eigbinv "eigbinv" Binned Value(1.1), "V";
        Nigbinv "nigbinv" Binned Value(3.0), "";
        Aigc "aigc" Binned ByType(1.36e-2, 9.8e-3), "(Fs^2/g)^1/2/m";
        Bigc "bigc" Binned ByType(1.71e-3, 7.59e-4), "(Fs^2/g)^1/2/mV";
        Cigc "cigc" Binned ByType(0.075, 0.03), "1/V";
        Aigsd "aigsd" Binned ByType(1.36e-2, 9.8e-3), "(Fs^2/g)^1/2/m";
        Bigsd "bigsd" Binned ByType(1.71e-3, 7.59e-4), "(Fs^2/g)^1/2/mV";
        Cigsd "cigsd" Binned ByType(0.075, 0.03), "1/V";
        Aigs "aigs" Binned Same(Id::Aigsd), "(Fs^2/g)^1/2/m";
        Bigs "bigs" Binned Same(Id::Bigsd), "(Fs^2/g)^1/2/mV";
        Cigs "cigs" Binned Same(Id::Cigsd), "1/V";
        Aigd "aigd" Binned Same(Id::Aigsd), "(Fs^2/g)^1/2/m";
        Bigd "bigd" Binned Same(Id::Bigsd), "(Fs^2/g)^1/2/mV";
        Cigd "cigd" Binned Same(Id::Cigsd), "1/V";
        Dlcig "dlcig" Plain Same(Id::Lint), "m";
        Dlcigd "dlcigd" Plain Same(Id::Dlcig), "m";
        Nigc "nigc" Binned Value(1.0), "";
        Poxedge "poxedge" Binned Value(1.0), "";
        Pigcd "pigcd" Binned Value(1.0), "";
        Ntox "ntox" Binned Value(1.0), "";
        Toxref "toxref" Plain Value(3e-9), "m";
        Vfbsdoff "vfbsdoff" Binned Value(0.0), "V";
    }
    "A.8, dimensions" {
        Xl "xl" Plain Value(0.0), "m";
        Xw "xw" Plain Value(0.0), "m";
        Wl "wl" Plain Value(0.0), "m^(WLN+1)";
        Wln "wln" Plain Value(1.0), "";
        Ww "ww" Plain Value(0.0), "m^(WWN+1)";
        Wwn "wwn" Plain Value(1.0), "";
        Wwl "wwl" Plain Value(0.0), "";
        Ll "ll" Plain Value(0.0), "m^(LLN+1)";
        Lln "lln" Plain Value(1.0), "";
        Lw "lw" Plain Value(0.0), "m^(LWN+1)";
        Lwn "lwn" Plain Value(1.0), "";
        Lwl "lwl" Plain Value(0.0), "";
        Wlc "wlc" Plain Same(Id::Wl), "m^(WLN+1)";
        Wwc "wwc" Plain Same(Id::Ww), "m^(WWN+1)";
        Wwlc "wwlc" Plain Same(Id::Wwl), "";
        Dwc "dwc" Plain Same(Id::Wint), "m";
        Dwj "dwj" Plain Same(Id::Dwc), "m";
        Lmin "lmin" Plain Value(0.0), "m";
        Lmax "lmax" Plain Value(1.0), "m";
        Wmin "wmin" Plain Value(0.0), "m";
        Wmax "wmax" Plain Value(1.0), "m";
    }
    "A.9, limits of use" {
        VgsMax "vgs_max" Plain Value(0.0), "V";
        VgsrMax "vgsr_max" Plain Same(Id::VgsMax), "V";
        VgdMax "vgd_max" Plain Value(0.0), "V";
        VgdrMax "vgdr_max" Plain Same(Id::VgdMax), "V";
        VgbMax "vgb_max" Plain Value(0.0), "V";
        VgbrMax "vgbr_max" Plain Same(Id::VgbMax), "V";
        VdsMax "vds_max" Plain Value(0.0), "V";
        VbsMax "vbs_max" Plain Value(0.0), "V";
        VbsrMax "vbsr_max" Plain Same(Id::VbsMax), "V";
        VbdMax "vbd_max" Plain Value(0.0), "V";
        VbdrMax "vbdr_max" Plain Same(Id::VbdMax), "V";
    }
    "A.9, layout" {
        Dmcg "dmcg" Plain Value(0.0), "m";
        Dmci "dmci" Plain Same(Id::Dmcg), "m";
        Dmdg "dmdg" Plain Value(0.0), "m";
        Dmcgt "dmcgt" Plain Value(0.0), "m";
    }
    "A.10, junction diodes" {
        Ijthsrev "ijthsrev" Plain Value(0.1), "A";
        Ijthdrev "ijthdrev" Plain Same(Id::Ijthsrev), "A";
        Ijthsfwd "ijthsfwd" Plain Value(0.1), "A";
        Ijthdfwd "ijthdfwd" Plain Same(Id::Ijthsfwd), "A";
        Xjbvs "xjbvs" Plain Value(1.0), "";
        Xjbvd "xjbvd" Plain Same(Id::Xjbvs), "";
        Bvs "bvs" Plain Value(10.0), "V";
        Bvd "bvd" Plain Same(Id::Bvs), "V";
        Jss "jss" Plain Value(1e-4), "A/m^2";
        Jsd "jsd" Plain Same(Id::Jss), "A/m^2";
        Jsws "jsws" Plain Value(0.0), "A/m";
        Jswd "jswd" Plain Same(Id::Jsws), "A/m";
        Jswgs "jswgs" Plain Value(0.0), "A/m";
        Jswgd "jswgd" Plain Same(Id::Jswgs), "A/m";
        Njs "njs" Plain Value(1.0), "";
        Njd "njd" Plain Same(Id::Njs), "";
        Xtis "xtis" Plain Value(3.0), "";
        Xtid "xtid" Plain Same(Id::Xtis), "";
        Jtss "jtss" Plain Value(0.0), "A/m^2";
        Jtsd "jtsd" Plain Same(Id::Jtss), "A/m^2";
        Jtssws "jtssws" Plain Value(0.0), "A/m";
        Jtsswd "jtsswd" Plain Same(Id::Jtssws), "A/m";
        Jtsswgs "jtsswgs" Plain Value(0.0), "A/m";
        Jtsswgd "jtsswgd" Plain Same(Id::Jtsswgs), "A/m";
        Jtweff "jtweff" Plain Value(0.0), "m";
        Njts "njts" Plain Value(20.0), "";
        Njtssw "njtssw" Plain Value(20.0), "";
        Njtsswg "njtsswg" Plain Value(20.0), "";
        Njtsd "njtsd" Plain Same(Id::Njts), "";
        Njtsswd "njtsswd" Plain Same(Id::Njtssw), "";
        Njtsswgd "njtsswgd" Plain Same(Id::Njtsswg), "";
        Xtss "xtss" Plain Value(0.02), "";
        Xtsd "xtsd" Plain Same(Id::Xtss), "";
        Xtssws "xtssws" Plain Value(0.02), "";
        Xtsswd "xtsswd" Plain Same(Id::Xtssws), "";
        Xtsswgs "xtsswgs" Plain Value(0.02), "";
        Xtsswgd "xtsswgd" Plain Same(Id::Xtsswgs), "";
        Vtss "vtss" Plain Value(10.0), "V";
        Vtsd "vtsd" Plain Same(Id::Vtss), "V";
        Vtssws "vtssws" Plain Value(10.0), "V";
        Vtsswd "vtsswd" Plain Same(Id::Vtssws), "V";
        Vtsswgs "vtsswgs" Plain Value(10.0), "V";
        Vtsswgd "vtsswgd" Plain Same(Id::Vtsswgs), "V";
        Tnjts "tnjts" Plain Value(0.0), "";
        Tnjtssw "tnjtssw" Plain Value(0.0), "";
        Tnjtsswg "tnjtsswg" Plain Value(0.0), "";
        Tnjtsd "tnjtsd" Plain Same(Id::Tnjts), "";
        Tnjtsswd "tnjtsswd" Plain Same(Id::Tnjtssw), "";
        Tnjtsswgd "tnjtsswgd" Plain Same(Id::Tnjtsswg), "";
    }
    "A.11, temperature" {
        Tnom "tnom" Plain Value(27.0), "C";
        Ute "ute" Binned Value(-1.5), "";
        Ucste "ucste" Binned Value(-4.775e-3), "";
        Kt1 "kt1" Binned Value(-0.11), "V";
        Kt1l "kt1l" Binned Value(0.0), "V m";
        Kt2 "kt2" Binned Value(0.022), "";
        Ua1 "ua1" Binned Value(1e-9), "m/V";
        Ub1 "ub1" Binned Value(-1e-18), "m^2/V^2";
        Uc1 "uc1" Binned Derived, "";
        Ud1 "ud1" Binned Value(0.0), "1/m^2";
        At "at" Binned Value(3.3e4), "m/s";
        Prt "prt" Binned Value(0.0), "ohm m";
        Tvoff "tvoff" Binned Value(0.0), "1/K";
        Tvfbsdoff "tvfbsdoff" Binned Value(0.0), "1/K";
        Tnfactor "tnfactor" Binned Value(0.0), "";
        Teta0 "teta0" Binned Value(0.0), "";
    }
    "A.12, layout stress" {
        Saref "saref" Plain Value(1e-6), "m";
        Sbref "sbref" Plain Value(1e-6), "m";
        Wlod "wlod" Plain Value(0.0), "m";
        Ku0 "ku0" Plain Value(0.0), "m";
        Kvsat "kvsat" Plain Value(0.0), "";
        Tku0 "tku0" Plain Value(0.0), "";
        Lku0 "lku0" Plain Value(0.0), "m^LLODKU0";
        Wku0 "wku0" Plain Value(0.0), "m^WLODKU0";
        Pku0 "pku0" Plain Value(0.0), "";
        Llodku0 "llodku0" Plain Value(0.0), "";
        Wlodku0 "wlodku0" Plain Value(0.0), "";
        Kvth0 "kvth0" Plain Value(0.0), "V m";
        Lkvth0 "lkvth0" Plain Value(0.0), "";
        Wkvth0 "wkvth0" Plain Value(0.0), "";
        Pkvth0 "pkvth0" Plain Value(0.0), "";
        Llodvth "llodvth" Plain Value(0.0), "";
        Wlodvth "wlodvth" Plain Value(0.0), "";
        Stk2 "stk2" Plain Value(0.0), "m";
        Lodk2 "lodk2" Plain Value(1.0), "";
        Steta0 "steta0" Plain Value(0.0), "m";
        Lodeta0 "lodeta0" Plain Value(1.0), "";
    }
    "A.13, well proximity" {
        Web "web" Plain Value(0.0), "";
        Wec "wec" Plain Value(0.0), "";
        Kvth0we "kvth0we" Binned Value(0.0), "V";
        K2we "k2we" Binned Value(0.0), "";
        Ku0we "ku0we" Binned Value(0.0), "";
        Scref "scref" Plain Value(1e-6), "m";
    }
}

/// What the value of a parameter must satisfy, bins added.
#[derive(Debug, Clone, Copy, PartialEq)]
pub enum Range {
    /// Above this.
    Above(f64),
    /// This or more.
    AtLeast(f64),
    /// Between these, both allowed.
    Within(f64, f64),
}

impl Range {
    /// Whether a value is allowed.
    pub fn allows(self, x: f64) -> bool {
        match self {
            Self::Above(low) => x > low,
            Self::AtLeast(low) => x >= low,
            Self::Within(low, high) => (low..=high).contains(&x),
        }
    }
}

impl std::fmt::Display for Range {
    fn fmt(&self, f: &mut std::fmt::Formatter<'_>) -> std::fmt::Result {
        match self {
            Self::Above(low) => write!(f, "a value above {low}"),
            Self::AtLeast(low) => write!(f, "{low} or more"),
            Self::Within(low, high) => write!(f, "{low} to {high}"),
        }
    }
}

/// Limits outside which an equation has no value (a root, a logarithm, a division), and the selectors that bring the
/// equation in; none for always.
pub const RANGES: &[(Id, Range, &[Id])] = &[
    (Id::Eot, Range::Above(0.0), &[Id::Mtrlmod]),
    (Id::Toxe, Range::Above(0.0), &[]),
    (Id::Toxp, Range::Above(0.0), &[]),
    (Id::Toxm, Range::Above(0.0), &[]),
    (Id::Toxref, Range::Above(0.0), &[Id::Igcmod, Id::Igbmod]),
    (Id::Epsrox, Range::Above(0.0), &[]),
    (Id::Epsrsub, Range::Above(0.0), &[Id::Mtrlmod]),
    (Id::Epsrgate, Range::AtLeast(0.0), &[Id::Mtrlmod]),
    (Id::Ni0sub, Range::Above(0.0), &[Id::Mtrlmod]),
    (Id::Bg0sub, Range::Above(0.0), &[Id::Mtrlmod]),
    (Id::Tbgbsub, Range::AtLeast(0.0), &[Id::Mtrlmod]),
    (Id::Ados, Range::Above(0.0), &[]),
    (Id::Bdos, Range::Above(0.0), &[]),
    (Id::Xj, Range::Above(0.0), &[]),
    (Id::Ndep, Range::Above(0.0), &[]),
    (Id::Nsub, Range::Above(0.0), &[]),
    (Id::Nsd, Range::Above(0.0), &[]),
    (Id::Ngate, Range::Within(0.0, 1e25), &[]),
    (Id::Dvt1, Range::AtLeast(0.0), &[]),
    (Id::Dvt1w, Range::AtLeast(0.0), &[]),
    (Id::Dsub, Range::AtLeast(0.0), &[]),
    (Id::Drout, Range::AtLeast(0.0), &[]),
    (Id::Delta, Range::AtLeast(0.0), &[]),
    (Id::Pclm, Range::AtLeast(0.0), &[]),
    (Id::Lp, Range::Above(0.0), &[]),
    (Id::Rsh, Range::AtLeast(0.0), &[]),
    (Id::Poxedge, Range::Above(0.0), &[Id::Igcmod, Id::Igbmod]),
    (Id::Nigc, Range::Above(0.0), &[Id::Igcmod]),
    (Id::Nigbacc, Range::Above(0.0), &[Id::Igbmod]),
    (Id::Nigbinv, Range::Above(0.0), &[Id::Igbmod]),
    (Id::Njs, Range::Above(0.0), &[]),
    (Id::Njd, Range::Above(0.0), &[]),
    (Id::Tnom, Range::Above(-273.15), &[]),
];

/// Values outside the ranges that bear on a card with these values, in the order of [`RANGES`].
pub fn ranges_broken(value: impl Fn(Id) -> f64) -> impl Iterator<Item = (Id, f64, Range)> {
    RANGES.iter().filter_map(move |&(id, range, used_by)| {
        let bears = used_by.is_empty() || used_by.iter().any(|&flag| value(flag) != 0.0);
        let v = value(id);
        (bears && !range.allows(v)).then_some((id, v, range))
    })
}

/// Number of parameters.
pub const COUNT: usize = ROWS.len();

/// Parameters of the manual that bear on charge, noise, radio-frequency networks or checking only.
pub const NO_STATIC_EFFECT: &[&str] = &[
    "acde",
    "acnqsmod",
    "af",
    "bvsd",
    "capmod",
    "cf",
    "cgbo",
    "cgdl",
    "cgdo",
    "cgsl",
    "cgso",
    "cigbcv",
    "cjd",
    "cjs",
    "cjswd",
    "cjswgd",
    "cjswgs",
    "cjsws",
    "ckappad",
    "ckappas",
    "clc",
    "cle",
    "cvchargemod",
    "dlc",
    "ef",
    "em",
    "fnoimod",
    "gbmin",
    "kf",
    "lintnoi",
    "llc",
    "lwc",
    "lwlc",
    "minvcv",
    "mjd",
    "mjs",
    "mjswd",
    "mjswgd",
    "mjswgs",
    "mjsws",
    "moin",
    "ngcon",
    "noff",
    "noia",
    "noib",
    "noic",
    "ntnoi",
    "paramchk",
    "pbd",
    "pbs",
    "pbswd",
    "pbswgd",
    "pbswgs",
    "pbsws",
    "rbdb",
    "rbdbx0",
    "rbdby0",
    "rbpb",
    "rbpbx0",
    "rbpbxl",
    "rbpbxnf",
    "rbpbxw",
    "rbpby0",
    "rbpbyl",
    "rbpbynf",
    "rbpbyw",
    "rbpd",
    "rbpd0",
    "rbpdl",
    "rbpdnf",
    "rbpdw",
    "rbps",
    "rbps0",
    "rbpsl",
    "rbpsnf",
    "rbpsw",
    "rbsb",
    "rbsbx0",
    "rbsby0",
    "rbsdbxl",
    "rbsdbxnf",
    "rbsdbxw",
    "rbsdbyl",
    "rbsdbynf",
    "rbsdbyw",
    "rgatemod",
    "rnoia",
    "rnoib",
    "rnoic",
    "rshg",
    "tcj",
    "tcjsw",
    "tcjswg",
    "tnoia",
    "tnoib",
    "tnoic",
    "tnoimod",
    "tpb",
    "tpbsw",
    "tpbswg",
    "trnqsmod",
    "tvoffcv",
    "vfbcv",
    "voffcv",
    "voffcvl",
    "xgl",
    "xgw",
    "xpart",
    "xrcrg1",
    "xrcrg2",
];
/// Members of [`NO_STATIC_EFFECT`] that take length, width and product terms.
pub const NO_STATIC_EFFECT_BINNED: &[&str] = &[
    "acde", "cf", "cgdl", "cgsl", "ckappad", "ckappas", "clc", "cle", "minvcv", "moin", "noff", "vfbcv",
    "voffcv", "xrcrg1", "xrcrg2",
];
/// Parameters of the manual that would change static currents and are not computed yet; refused, not ignored.
pub const NOT_COMPUTED: &[&str] = &["nfactor0"];

/// Which part of a parameter a name of the card gives.
#[derive(Debug, Clone, Copy, PartialEq, Eq)]
pub enum Part {
    /// The value itself.
    Base,
    /// The length term.
    Length,
    /// The width term.
    Width,
    /// The product term.
    Product,
}

/// What a name in a card stands for.
#[derive(Debug, Clone, Copy, PartialEq, Eq)]
pub enum Meaning {
    /// A parameter that is computed.
    Static(Id, Part),
    /// Known, without effect on static currents.
    NoEffect,
    /// Known, would have an effect, not computed.
    NotComputed,
}

/// Looks a name of a card up.
pub fn meaning(name: &str) -> Option<Meaning> {
    static INDEX: std::sync::LazyLock<rustc_hash::FxHashMap<String, Meaning>> =
        std::sync::LazyLock::new(|| {
            let mut map = rustc_hash::FxHashMap::default();
            let parts = [("l", Part::Length), ("w", Part::Width), ("p", Part::Product)];
            for (row, id) in ROWS.iter().zip(IDS) {
                if row.kind == Kind::Binned {
                    for (letter, part) in parts {
                        map.insert(format!("{letter}{}", row.name), Meaning::Static(*id, part));
                    }
                }
            }
            for name in NO_STATIC_EFFECT_BINNED {
                for (letter, _) in parts {
                    map.insert(format!("{letter}{name}"), Meaning::NoEffect);
                }
            }
            // names of their own win over a letter in front of another name
            for name in NO_STATIC_EFFECT {
                map.insert((*name).to_owned(), Meaning::NoEffect);
            }
            for name in NOT_COMPUTED {
                map.insert((*name).to_owned(), Meaning::NotComputed);
            }
            for (row, id) in ROWS.iter().zip(IDS) {
                map.insert(row.name.to_owned(), Meaning::Static(*id, Part::Base));
            }
            // other spellings in use for the same parameters
            for (alias, id) in [
                ("pdibl1", Id::Pdiblc1),
                ("pdibl2", Id::Pdiblc2),
                ("pdiblb", Id::Pdiblcb),
                ("vtho", Id::Vth0),
            ] {
                map.insert(alias.to_owned(), Meaning::Static(id, Part::Base));
            }
            map
        });
    INDEX.get(name).copied()
}

/// All names a card may use, for suggestions.
pub fn known_names() -> impl Iterator<Item = &'static str> {
    ROWS.iter().map(|r| r.name).chain(NO_STATIC_EFFECT.iter().copied()).chain(NOT_COMPUTED.iter().copied())
}

#[cfg(test)]
mod tests {
    use super::*;

    #[test]
    fn names_stand_for_one_thing_each() {
        assert_eq!(meaning("lvth0"), Some(Meaning::Static(Id::Vth0, Part::Length)));
        assert_eq!(meaning("lint"), Some(Meaning::Static(Id::Lint, Part::Base)));
        assert_eq!(meaning("lw"), Some(Meaning::Static(Id::Lw, Part::Base)));
        assert_eq!(meaning("pku0"), Some(Meaning::Static(Id::Pku0, Part::Base)));
        assert_eq!(meaning("pku0we"), Some(Meaning::Static(Id::Ku0we, Part::Product)));
        assert_eq!(meaning("cjs"), Some(Meaning::NoEffect));
        assert_eq!(meaning("vht0"), None);
        let mut names: Vec<_> = known_names().collect();
        names.sort_unstable();
        let all = names.len();
        names.dedup();
        assert_eq!(names.len(), all, "a name stands twice in the table");
    }
}
