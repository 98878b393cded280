use _core::kernels::error::KernelError;

#[test]
fn every_refusal_says_what_was_expected_what_came_and_what_to_do() {
    let table = [
        (
            KernelError::Shape {
                argument: "out",
                expected: vec![4, 3],
                found: vec![3, 4],
            },
            "out: expected shape (4, 3), got (3, 4); reshape out to fit the other arguments",
        ),
        (
            KernelError::Shape {
                argument: "w",
                expected: vec![4],
                found: vec![5],
            },
            "w: expected shape (4,), got (5,); reshape w to fit the other arguments",
        ),
        (
            KernelError::Misaligned { argument: "x" },
            "x: expected float64 entries on 8-byte boundaries, got a misaligned array; copy it with \
             numpy.array(x, dtype=float)",
        ),
        (
            KernelError::Overlap { argument: "out" },
            "out: expected an array whose entries lie apart, got one that overlaps itself; make it \
             with numpy.empty",
        ),
        (
            KernelError::Empty { argument: "x" },
            "x: expected at least one entry, got none; pass at least one",
        ),
        (
            KernelError::Range {
                argument: "n",
                expected: "1 to 1024 threads",
                found: 0.0,
            },
            "n: expected 1 to 1024 threads, got 0; choose a value in that range",
        ),
        (
            KernelError::Starts {
                position: 2,
                found: Some(3),
                draws: 10,
            },
            "starts: expected 0 first, then rising positions that end with 10, the number of draws, \
             got 3 at position 2; pass where each chain begins, and the number of draws last",
        ),
        (
            KernelError::Starts {
                position: 0,
                found: None,
                draws: 10,
            },
            "starts: expected 0 first, then rising positions that end with 10, the number of draws, \
             got only 0 positions; pass where each chain begins, and the number of draws last",
        ),
        (
            KernelError::NoWeight {
                offender: Some((3, -0.5)),
            },
            "w: expected finite, non-negative weights with a positive sum, got -0.5 at index 3; \
             remove or correct such weights first",
        ),
        (
            KernelError::NoWeight { offender: None },
            "w: expected finite, non-negative weights with a positive sum, got no positive weight; \
             remove or correct such weights first",
        ),
        (
            KernelError::TooFewPositive {
                size: 9,
                positive: 4,
            },
            "size: expected at most 4, the number of positive weights, got 9; ask for fewer draws or \
             use a method with replacement",
        ),
        (
            KernelError::Method {
                found: "bootstrap".to_owned(),
            },
            "method: expected one of multinomial, stratified, systematic, residual, \
             without_replacement, got 'bootstrap'; choose one of these",
        ),
        (
            KernelError::Key { found: 16 },
            "key: expected 32 bytes, got 16; draw it with rng.bytes(32)",
        ),
        (
            KernelError::Memory { entries: 7 },
            "size: expected a result that fits into memory, got 7 entries; ask for fewer",
        ),
        (
            KernelError::Interrupted,
            "stopped on request; call again to start over",
        ),
    ];
    for (error, text) in table {
        assert_eq!(error.to_string(), text);
    }
}
