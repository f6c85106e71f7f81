//! Which MPI library is this? Handles, constants and structures of one MPI library mean nothing to
//! another, so a library other than the one built against must be refused before the first handle is used.
//!
//! Pure text work: the texts come from the build, from the host's own headers and from
//! `MPI_Get_library_version`.

use std::fmt;

/// Libraries with one binary interface of their own.
#[derive(Debug, Clone, Copy, PartialEq, Eq)]
pub enum Family {
    /// Open MPI.
    OpenMpi,
    /// MPICH.
    Mpich,
    /// Intel MPI.
    IntelMpi,
    /// MVAPICH and MVAPICH2.
    Mvapich,
    /// Cray MPICH.
    CrayMpich,
    /// None of those.
    Other,
}

impl Family {
    fn name(self) -> &'static str {
        match self {
            Family::OpenMpi => "Open MPI",
            Family::Mpich => "MPICH",
            Family::IntelMpi => "Intel MPI",
            Family::Mvapich => "MVAPICH",
            Family::CrayMpich => "Cray MPICH",
            Family::Other => "an MPI library of unknown make",
        }
    }
}

/// A library's family and version.
#[derive(Debug, Clone, Copy, PartialEq, Eq)]
pub struct Library {
    /// Whose it is.
    pub family: Family,
    /// First number of its version, 0 when not said.
    pub major: u32,
    /// Second number of its version, 0 when not said.
    pub minor: u32,
}

impl fmt::Display for Library {
    fn fmt(&self, f: &mut fmt::Formatter<'_>) -> fmt::Result {
        match (self.family, self.major, self.minor) {
            (family, 0, 0) => f.write_str(family.name()),
            (family, major, minor) => write!(f, "{} {major}.{minor}", family.name()),
        }
    }
}

impl Library {
    /// Reads a library's own description of itself (`MPI_Get_library_version`), or the short text
    /// that a build or a host's header makes of the version macros, such as `Open MPI 4.1`.
    pub fn parse(text: &str) -> Library {
        // Descendants first: they also name what they descend from.
        const MARKS: [(&str, Family); 7] = [
            ("Cray MPICH version", Family::CrayMpich),
            ("Cray MPICH", Family::CrayMpich),
            ("Intel(R) MPI Library", Family::IntelMpi),
            ("Intel MPI", Family::IntelMpi),
            ("MVAPICH", Family::Mvapich),
            ("Open MPI", Family::OpenMpi),
            ("MPICH", Family::Mpich),
        ];
        let upper = text.to_ascii_uppercase();
        for (mark, family) in MARKS {
            if let Some(at) = upper.find(&mark.to_ascii_uppercase()) {
                // "MVAPICH2 Version": the 2 belongs to the name.
                let rest = upper[at + mark.len()..].trim_start_matches('2');
                let (major, minor) = first_version(rest);
                return Library {
                    family,
                    major,
                    minor,
                };
            }
        }
        Library {
            family: Family::Other,
            major: 0,
            minor: 0,
        }
    }

    /// May code built against `self` call `other`? Same family, same major version.
    pub fn accepts(&self, other: &Library) -> bool {
        self.family == other.family && self.major == other.major
    }
}

/// The first two numbers of the first version in a text.
fn first_version(text: &str) -> (u32, u32) {
    let start = text
        .find(|c: char| c.is_ascii_digit())
        .unwrap_or(text.len());
    let mut numbers = text[start..]
        .split(|c: char| !c.is_ascii_digit())
        .map(|digits| digits.parse().unwrap_or(0));
    (numbers.next().unwrap_or(0), numbers.next().unwrap_or(0))
}

/// Refuses an MPI library other than the one built against.
///
/// `built` and `running` describe the library built against and the one in this process; `host` is what
/// the host was compiled with, or empty when it does not say; `host_handle` is the size of its `MPI_Comm`
/// and `our_handle` of ours, in bytes.
///
/// # Errors
/// A sentence that names both libraries and says what to do.
pub fn check(
    built: &str,
    running: &str,
    host: &str,
    host_handle: usize,
    our_handle: usize,
) -> Result<(), String> {
    let ours = Library::parse(built);
    let there = Library::parse(running);
    let remedy = "link the limnograph that was built for the host's MPI library, or build limnograph again with \
                  MPICC set to the host's MPI compiler wrapper";
    if !ours.accepts(&there) {
        let said = running.lines().next().unwrap_or("").trim();
        return Err(format!(
            "this limnograph was built against {ours}, but the MPI library in this process is {there} \
             (it calls itself \"{said}\"): {remedy}"
        ));
    }
    if !host.is_empty() && !ours.accepts(&Library::parse(host)) {
        return Err(format!(
            "this limnograph was built against {ours}, but the host was compiled with {}: {remedy}",
            Library::parse(host)
        ));
    }
    if host_handle != our_handle {
        return Err(format!(
            "this limnograph was built against {ours}, whose MPI_Comm has {our_handle} bytes, but the host's has \
             {host_handle}: it was compiled with another MPI library; {remedy}"
        ));
    }
    Ok(())
}

#[cfg(test)]
mod tests {
    use super::*;

    // What `MPI_Get_library_version` says. The first and the third were printed by the libraries of Debian 12;
    // the others are from memory of such printouts.
    const OPEN_MPI: &str =
        "Open MPI v4.1.4, package: Debian OpenMPI, ident: 4.1.4, repo rev: v4.1.4, May 26, 2022";
    const OPEN_MPI_5: &str = "Open MPI v5.0.3, package: Open MPI builder@host Distribution, ident: 5.0.3, repo rev: \
                              v5.0.3, Apr 08, 2024";
    const MPICH: &str = "MPICH Version:\t4.0.2\nMPICH Release date:\tThu Apr  7 12:34:45 CDT 2022\nMPICH ABI:\t14:2:2\n";
    const MPICH_3: &str = "MPICH Version:      3.3a2\nMPICH Release date: Sun Nov 13 09:12:11 MST 2016\nMPICH ABI:          12:1:0\n";
    const INTEL: &str = "Intel(R) MPI Library 2021.9 for Linux* OS\n";
    const MVAPICH2: &str =
        "MVAPICH2 Version      :\t2.3.7\nMVAPICH2 Release date :\tWed March 02 22:00:00 EST 2022\n";
    const MVAPICH3: &str = "MVAPICH Version:        3.0\nMVAPICH Release date:   02/02/2024\n";
    const CRAY: &str = "MPI VERSION    : CRAY MPICH version 8.1.25.17 (ANL base 3.4a2)\nMPI BUILD INFO : Sun Feb 26 2023\n";

    fn library(family: Family, major: u32, minor: u32) -> Library {
        Library {
            family,
            major,
            minor,
        }
    }

    #[test]
    fn libraries_are_told_apart_by_their_own_words() {
        assert_eq!(Library::parse(OPEN_MPI), library(Family::OpenMpi, 4, 1));
        assert_eq!(Library::parse(OPEN_MPI_5), library(Family::OpenMpi, 5, 0));
        assert_eq!(Library::parse(MPICH), library(Family::Mpich, 4, 0));
        assert_eq!(Library::parse(MPICH_3), library(Family::Mpich, 3, 3));
        assert_eq!(Library::parse(INTEL), library(Family::IntelMpi, 2021, 9));
        assert_eq!(Library::parse(MVAPICH2), library(Family::Mvapich, 2, 3));
        assert_eq!(Library::parse(MVAPICH3), library(Family::Mvapich, 3, 0));
        assert_eq!(Library::parse(CRAY), library(Family::CrayMpich, 8, 1));
        assert_eq!(
            Library::parse("a library nobody has met"),
            library(Family::Other, 0, 0)
        );
    }

    #[test]
    fn short_names_from_headers_mean_the_same() {
        for (short, long) in [
            ("Open MPI 4.1", OPEN_MPI),
            ("MPICH 4.0.2", MPICH),
            // As a header has it that makes a string of a macro that is one already.
            ("MPICH \"4.0.2\"", MPICH),
            ("Intel MPI 2021.9.0", INTEL),
            ("MVAPICH2 2.3.7", MVAPICH2),
            ("MVAPICH 3.0", MVAPICH3),
            ("Cray MPICH 8.1.25.17", CRAY),
        ] {
            assert_eq!(Library::parse(short), Library::parse(long), "{short}");
        }
    }

    #[test]
    fn a_name_printed_is_read_back_as_the_same() {
        for text in [OPEN_MPI, MPICH, INTEL, MVAPICH2, MVAPICH3, CRAY] {
            let library = Library::parse(text);
            assert_eq!(Library::parse(&library.to_string()), library);
        }
    }

    #[test]
    fn only_the_same_family_and_major_version_is_accepted() {
        let all = [
            OPEN_MPI, OPEN_MPI_5, MPICH, MPICH_3, INTEL, MVAPICH2, MVAPICH3, CRAY,
        ];
        for (i, built) in all.iter().enumerate() {
            for (j, running) in all.iter().enumerate() {
                assert_eq!(
                    check(built, running, "", 8, 8).is_ok(),
                    i == j,
                    "{built} against {running}"
                );
            }
        }
        assert!(check("Open MPI 4.0", OPEN_MPI, "Open MPI 4.2", 8, 8).is_ok());
    }

    #[test]
    fn a_refusal_names_both_libraries_and_the_remedy() {
        let text = check("Open MPI 4.1", MPICH, "", 8, 8).unwrap_err();
        for part in [
            "built against Open MPI 4.1",
            "is MPICH 4.0",
            "MPICH Version:\t4.0.2",
            "MPICC",
        ] {
            assert!(text.contains(part), "{part:?} is missing from {text:?}");
        }
        let text = check("Open MPI 4.1", OPEN_MPI, "MPICH 4.0.2", 8, 8).unwrap_err();
        assert!(text.contains("compiled with MPICH 4.0"), "{text}");
    }

    #[test]
    fn a_handle_of_another_size_is_refused() {
        assert!(
            check("Open MPI 4.1", OPEN_MPI, "", 4, 8)
                .unwrap_err()
                .contains("4: it was compiled with another")
        );
    }
}
