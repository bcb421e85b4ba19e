//! Files that a plan names: graphs, held values, and their names.

use super::*;
use crate::lattice::Spin;

/// `tests/vectors/laws.json`: "a triangle with listed couplings and fields".
#[test]
fn a_graph_file_gives_the_known_law() {
    let files: Files<'_> = &[
        ("bonds.csv", TRIANGLE.as_bytes()),
        ("sites.csv", TRIANGLE_SITES.as_bytes()),
    ];
    let plan = read(&sites("beta = 1"), files).unwrap();
    assert_eq!(plan.ensembles()[0].key().to_string(), known_key("a triangle"));
    assert_eq!(**plan.ensembles()[0].labels().unwrap(), ["a", "b", "c"]);
    let names: Vec<_> = plan
        .files()
        .iter()
        .map(|file| (file.name.as_str(), file.bytes.as_slice()))
        .collect();
    assert_eq!(names, files);
}

#[test]
fn graphs_are_numbered_read_once_and_shared() {
    let mut reads = Vec::new();
    let text = graph("beta = [1, 2]") + &graph("beta = 3")["title = \"Larkmoor\"\n".len()..];
    let plan = Plan::read(text.as_bytes(), &mut |name| {
        reads.push(name.to_string());
        Ok(BONDS.as_bytes().to_vec())
    })
    .unwrap();
    assert_eq!(reads, ["bonds.csv"]);
    assert_eq!(plan.files().len(), 1);
    let graphs: Vec<_> = plan
        .ensembles()
        .iter()
        .map(|one| one.law().lattice().graph().unwrap())
        .collect();
    assert!(graphs.iter().all(|other| Arc::ptr_eq(other, graphs[0])));
    assert_eq!(graphs[0].edges(), [[0, 1], [1, 2], [0, 2]]);
    assert_eq!(**plan.ensembles()[2].labels().unwrap(), ["weir", "mill", "ford"]);

    let listed = |bonds: &str, list: &str| {
        let plan = read(
            &sites("beta = 1"),
            &[("bonds.csv", bonds.as_bytes()), ("sites.csv", list.as_bytes())],
        )
        .unwrap();
        let one = &plan.ensembles()[0];
        let graph = one.law().lattice().graph().unwrap();
        (graph.sites(), graph.edges().to_vec(), one.labels().unwrap().to_vec())
    };
    // a site list numbers the sites; one without an edge may stand in it; blanks, blank lines, quotes, BOM
    let (count, edges, labels) = listed(
        "\u{feff}weir ,\"mill\"\r\n\r\n  \n\"mill\",ford",
        "ford\nisle of mist\nmill\n\nweir\n",
    );
    assert_eq!((count, edges), (4, vec![[3, 2], [2, 0]]));
    assert_eq!(labels[1], "isle of mist");
    assert_eq!(listed("", "site\nalone\n").0, 1);
    assert_eq!(
        listed("\"a,b\",\"say \"\"c\"\"\"", "\"say \"\"c\"\"\"\n\"a,b\"\n").1,
        [[1, 0]]
    );
    // a header is one only if it is exactly that, and first
    assert_eq!(listed("a,b\nfrom,to\n", "a\nb\nsite\nfrom\nto\n").1, [[0, 1], [3, 4]]);
    assert_eq!(listed("From,to\n", "to\nFrom\n").1, [[1, 0]]);
    assert!(listed("from,to\n", "to\nfrom\n").1.is_empty());
}

#[test]
fn couplings_and_fields_are_common_or_listed() {
    let triangle = TRIANGLE.as_bytes();
    let model = |text: &str, files: Files<'_>| match read(text, files).unwrap().ensembles()[0].law().model() {
        Model::Ising { coupling, field, .. } => (coupling.is_some(), field.is_some()),
        Model::LatticeGas { .. } => panic!("an Ising law"),
    };
    let plain: Files<'_> = &[
        ("bonds.csv", b"a,b\nb,c\na,c\n"),
        ("sites.csv", TRIANGLE_SITES.as_bytes()),
    ];
    assert_eq!(model(&sites("beta = 1\ncoupling = 2"), plain), (true, false));
    assert_eq!(
        model(&graph("beta = 1\nfield = 2"), &[("bonds.csv", triangle)]),
        (false, true)
    );
    refused(
        &graph("beta = 1\ncoupling = 1"),
        &[("bonds.csv", triangle)],
        &[
            "line 7: coupling: coupling stands beside couplings listed edge by edge",
            "request.conflict",
        ],
    );
    refused(
        &sites("beta = 1\nfield = 0"),
        plain,
        &["line 7: field: field stands beside fields listed"],
    );
    let gas = sites("activity = 1").replace("ising", "lattice-gas");
    refused(
        &gas,
        plain,
        &["line 5: lattice: a lattice gas has no couplings and no fields"],
    );
    let gas = graph("activity = 1").replace("ising", "lattice-gas");
    refused(
        &gas,
        &[("bonds.csv", triangle)],
        &["line 5: lattice: a lattice gas has no"],
    );
}

#[test]
fn faults_of_graph_files_name_file_line_and_column() {
    let long = "x".repeat(201);
    #[rustfmt::skip] // a case a line
    let cases: &[(&str, &str, &[&str])] = &[
        ("from,to\na,b\n\nb,b\n", "", &["bonds.csv: line 4: to: found an edge from site \"b\" to itself, expected two"]),
        ("a,b\nb\n", "", &["bonds.csv: line 2: found 1 columns, expected 2 in every row"]),
        ("a,b\nb,c,1\n", "", &["bonds.csv: line 2: found 3 columns, expected 2 in every row"]),
        ("a,b,1\nb,c\n", "", &["bonds.csv: line 2: found 2 columns, expected 3 in every row"]),
        ("from,to,coupling\nb,c\n", "", &["bonds.csv: line 2: found 2 columns, expected 3"]),
        ("a,b,1,2\n", "", &["bonds.csv: line 1: found 4 columns, expected from,to or from,to,coupling"]),
        ("a\n", "", &["bonds.csv: line 1: found 1 columns, expected from,to or"]),
        ("a,b,x\n", "", &["bonds.csv: line 1: coupling: found \"x\", expected a decimal such as 0.44 or a fraction"]),
        ("a,b,0x10\n", "", &["coupling: found \"0x10\""]),
        ("a,\n", "", &["bonds.csv: line 1: to: found an empty label"]),
        ("\"\"\n", "", &["bonds.csv: line 1: found 1 columns"]),
        ("\" \"\n", "", &["bonds.csv: line 1: found 1 columns"]),
        ("a,\"b\nc\"\n", "", &["bonds.csv: line 1: to: found \"b\\nc\", expected a site label without control"]),
        ("a,b\u{7}\n", "", &["to: found \"b\\u{7}\""]),
        (&format!("a,{long}\n"), "", &["bonds.csv: line 1: to: bytes of a site label: found 201, at most 200"]),
        ("a,b\na, \"b\"\n", "", &["bonds.csv: line 2: not valid CSV: a quotation mark must follow the comma"]),
        ("a,b\na,\"c", "", &["bonds.csv: line 2: not valid CSV: an odd number of quotation marks"]),
        ("", "", &["bonds.csv: found no site, expected at least one"]),
        ("from,to\n", "", &["bonds.csv: found no site"]),
        ("a,b\n", "a\n", &["bonds.csv: line 1: to: found site \"b\", expected a site listed in sites.csv"]),
        ("a,b\n", "a\nb\n\na\n", &["sites.csv: line 4: site: site \"a\" is listed on line 1 and on line 4"]),
        ("a,b\n", "a,0\nb\n", &["sites.csv: line 2: found 1 columns, expected 2"]),
        ("a,b\n", "a,0\nb,nan\n", &["sites.csv: line 2: field: found \"nan\", expected a decimal"]),
        ("a,b\n", "a\n\"\"\n", &["sites.csv: line 2: site: found an empty label"]),
        ("a,b\n", "a\n\"  \"\n", &["sites.csv: line 2: site: found an empty label"]),
        ("a,b\n", "a,1,2\n", &["sites.csv: line 1: found 3 columns, expected site or site,field"]),
        ("a,b\n", "\n", &["bonds.csv: line 1: from: found site \"a\", expected a site listed in sites.csv"]),
        ("", "\n", &["sites.csv: found no site"]),
    ];
    for (bonds, list, parts) in cases {
        let files: Files<'_> = &[("bonds.csv", bonds.as_bytes()), ("sites.csv", list.as_bytes())];
        let text = if list.is_empty() {
            graph("beta = 1")
        } else {
            sites("beta = 1")
        };
        refused(&text, files, parts);
    }
    refused(
        &graph("beta = 1"),
        &[("bonds.csv", b"a,b\nb,\xff\n")],
        &["bonds.csv: line 2: not valid CSV: bytes that"],
    );
    // a fault of the plan's own is not taken for one of the file
    assert_eq!(
        read(&graph("beta = 1"), &[("bonds.csv", b"a,a\n")])
            .unwrap_err()
            .in_file(std::path::Path::new("plan.toml"))
            .to_string(),
        "bonds.csv: line 1: to: found an edge from site \"a\" to itself, expected two different sites [request.value]"
    );
}

/// `tests/vectors/laws.json`: "square 16 x 16, sites 0 and 7 held".
#[test]
fn held_sites_are_numbers_or_labels() {
    let known = known_key("square 16 x 16, sites 0 and 7 held");
    for text in ["site,value\n7,-1\n0,+1\n", "0,1\n7,0\n", "\"0\", 1\n\n 7 ,\t0"] {
        let plan = read(
            &square("beta = 0.4\nheld = \"held.csv\""),
            &[("held.csv", text.as_bytes())],
        )
        .unwrap();
        assert_eq!(plan.ensembles()[0].key().to_string(), known, "{text}");
        assert_eq!(plan.files()[0].bytes, text.as_bytes());
    }
    let files: Files<'_> = &[("bonds.csv", BONDS.as_bytes()), ("held.csv", b"ford,1\nweir,-1\n")];
    let plan = read(&graph("beta = [1, 2]\nheld = \"held.csv\""), files).unwrap();
    let held = |ensemble: usize| plan.ensembles()[ensemble].law().held().unwrap();
    assert_eq!(held(0).sites(), [(0, Spin::Minus), (2, Spin::Plus)]);
    assert!(Arc::ptr_eq(held(0), held(1)));
    assert_eq!(
        plan.files().iter().map(|file| file.name.as_str()).collect::<Vec<_>>(),
        ["bonds.csv", "held.csv"]
    );

    for (rows, parts) in [
        (
            "0,1\n256,1\n",
            "held.csv: line 2: site: found site \"256\", expected a site number below 256",
        ),
        (
            "-1,1\n",
            "held.csv: line 1: site: found site \"-1\", expected a site number",
        ),
        (
            "weir,1\n",
            "held.csv: line 1: site: found site \"weir\", expected a site number",
        ),
        (
            "0,2\n",
            "held.csv: line 1: value: found \"2\", expected 1 or +1 (plus, occupied), -1 or 0",
        ),
        (
            "0,-1\n1,1\n\n2,0\n",
            "held.csv: line 4: value: 0 stands beside -1 on line 1",
        ),
        (
            "0,1\n1,1\n00,1\n",
            "held.csv: line 3: site: site \"00\" is held on line 1 and on line 3",
        ),
        ("0\n", "held.csv: line 1: found 1 columns, expected site,value"),
        ("0,1,1\n", "held.csv: line 1: found 3 columns, expected site,value"),
        ("", "held.csv: found no held site, expected at least one"),
        ("site,value\n", "held.csv: found no held site"),
    ] {
        refused(
            &square("beta = 0.4\nheld = \"held.csv\""),
            &[("held.csv", rows.as_bytes())],
            &[parts],
        );
    }
    let files: Files<'_> = &[("bonds.csv", BONDS.as_bytes()), ("held.csv", b"0,1\n")];
    let parts = ["held.csv: line 1: site: found site \"0\", expected a site of the graph"];
    refused(&graph("beta = 1\nheld = \"held.csv\""), files, &parts);
    let gas = square("activity = 1\nheld = \"held.csv\"").replace("ising", "lattice-gas");
    refused(
        &gas,
        &[("held.csv", b"0,1\n1,1\n")],
        &["line 7: held: held values have weight zero"],
    );
}

#[test]
fn file_names_stay_inside_the_folder_of_the_plan() {
    for name in ["bonds.csv", "a/b+c/d", "...", ".x", ".-x", "..a/b..", &"x".repeat(60)] {
        assert!(check_file_name(name).is_ok(), "{name:?}");
    }
    for name in [
        "", "/etc/x", "../x", "a/../b", "a/..", ".", "./x", "a//b", "a/", "a\\b", "c:x", "é.csv", "a\nb", "a\u{7f}",
        "a b", "-a", "a/-b", "a'b",
    ] {
        assert!(check_file_name(name).is_err(), "{name:?}");
    }
    assert!(check_file_name(&"x".repeat(61)).is_err());
    let named = |name: &str| graph("beta = 1").replace("\"bonds.csv\"", &format!("'{name}'"));
    refused(
        &named("../bonds.csv"),
        &[],
        &["line 5: edges: found \"../bonds.csv\", expected a relative file name inside"],
    );
    refused(
        &named(&"x".repeat(61)),
        &[],
        &["line 5: edges: bytes of a file name: found 61, at most 60"],
    );
    refused(
        &named("lost.csv"),
        &[],
        &["line 5: edges \"lost.csv\": open: ", "machine.io"],
    );
    refused(
        &square("beta = 1\nheld = 3"),
        &[],
        &["line 7: held: found 3, expected the name of a file"],
    );
    let huge = Plan::read(graph("beta = 1").as_bytes(), &mut |_| Ok(vec![0; (256 << 20) + 1])).unwrap_err();
    assert!(
        huge.to_string()
            .contains("line 5: edges: bytes of bonds.csv: found 268435457, at most 268435456")
    );
    // archive members must differ where case does not count
    let twice = graph("beta = 1\nheld = \"Bonds.CSV\"");
    refused(
        &twice,
        &[("bonds.csv", BONDS.as_bytes()), ("Bonds.CSV", b"a,1\n")],
        &["held: Bonds.CSV and bonds.csv cannot stand in one archive"],
    );
    // the reader of files names the file itself
    let lost = Plan::read(graph("beta = 1").as_bytes(), &mut |name| {
        let refusal = Error::io("open", std::io::Error::from(std::io::ErrorKind::NotFound));
        Err(refusal.in_file(std::path::Path::new(name)))
    });
    assert!(
        lost.unwrap_err()
            .to_string()
            .starts_with("bonds.csv: edges on line 5 of the plan: open: ")
    );
}
