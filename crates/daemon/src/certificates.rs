//! The certificates of a bench, as files in a folder beside the bench file.
//!
//! One file a certificate, named after its identity, written once and never altered; the results
//! of a verification are put beside the certificate that was verified. A file that is no
//! certificate, or was altered, is told and never used.
//!
//! What it deliberately does not do: take a certificate into use. The bench file says which one
//! holds, and that is for a person to change.

use std::fs::{self, File, OpenOptions};
use std::io::{self, Write as _};
use std::path::{Path, PathBuf};

use serde::Serialize;
use serde::de::DeserializeOwned;
use sink::calibration::{Certificate, Identity, drift};

use crate::view::{CertificateList, CertificateSummary, VerificationView};

/// The folder beside the bench file.
const FOLDER: &str = "certificates";
/// How the name of a certificate's file ends.
const ENDING: &str = ".json";
/// What stands between a certificate's identity and the run that verified it.
const VERIFICATION: &str = ".verification.";

/// The certificates beside a bench file.
#[derive(Debug, Clone)]
pub struct Certificates {
    folder: PathBuf,
}

/// Why a certificate cannot be had or kept.
#[derive(Debug, thiserror::Error)]
pub enum CertificatesError {
    /// None of this identity.
    #[error("no certificate `{identity}` in {}; see what there is with `sinkwarden certificates`", folder.display())]
    Missing {
        /// Which was wanted.
        identity: String,
        /// Where.
        folder: PathBuf,
    },
    /// There is one already, and certificates are never overwritten.
    #[error(
        "there is a certificate `{0}` already, and none is ever overwritten; choose another identity"
    )]
    Exists(String),
    /// A name that is none.
    #[error(transparent)]
    Identity(#[from] sink::calibration::StatementError),
    /// A file that is no sound certificate.
    #[error("{}: {reason}", path.display())]
    Unsound {
        /// The file.
        path: PathBuf,
        /// Why.
        reason: String,
    },
    /// What the disk says.
    #[error("{}: {source}", path.display())]
    Disk {
        /// The file or folder.
        path: PathBuf,
        /// What the operating system says.
        source: io::Error,
    },
}

impl Certificates {
    /// Those beside a bench file.
    pub fn beside(bench: &Path) -> Self {
        Self {
            folder: bench.parent().unwrap_or(Path::new("")).join(FOLDER),
        }
    }

    /// How the bench file names a certificate.
    pub fn entry(identity: &str) -> String {
        format!("{FOLDER}/{identity}{ENDING}")
    }

    /// Where a certificate is, or would be.
    pub fn path(&self, identity: &str) -> PathBuf {
        self.folder.join(format!("{identity}{ENDING}"))
    }

    /// Whether an identity is a plain name that no certificate has yet.
    ///
    /// # Errors
    /// [`CertificatesError::Identity`], [`CertificatesError::Exists`].
    pub fn is_free(&self, identity: &str) -> Result<(), CertificatesError> {
        Identity::check(identity)?;
        if self.path(identity).exists() {
            return Err(CertificatesError::Exists(identity.to_owned()));
        }
        Ok(())
    }

    /// One certificate, computed again from its own points.
    ///
    /// # Errors
    /// [`CertificatesError`] with the file.
    pub fn load(&self, identity: &str) -> Result<Certificate, CertificatesError> {
        Identity::check(identity)?;
        let path = self.path(identity);
        let text = fs::read_to_string(&path).map_err(|source| {
            if source.kind() == io::ErrorKind::NotFound {
                return CertificatesError::Missing {
                    identity: identity.to_owned(),
                    folder: self.folder.clone(),
                };
            }
            CertificatesError::Disk {
                path: path.clone(),
                source,
            }
        })?;
        Certificate::from_json(&text).map_err(|error| CertificatesError::Unsound {
            path,
            reason: error.to_string(),
        })
    }

    /// Puts a new certificate on stable storage; its file's path.
    ///
    /// # Errors
    /// [`CertificatesError`] if there is one of its identity, or the disk refuses.
    pub fn keep(&self, certificate: &Certificate) -> Result<PathBuf, CertificatesError> {
        let identity = &certificate.measurements.identity;
        self.is_free(identity)?;
        let path = self.path(identity);
        self.write(&path, certificate)?;
        Ok(path)
    }

    /// Puts the result of a verification beside its certificate; `run` names it.
    ///
    /// # Errors
    /// [`CertificatesError`] if the disk refuses.
    pub fn keep_verification(
        &self,
        verification: &VerificationView,
        run: &str,
    ) -> Result<PathBuf, CertificatesError> {
        let identity = &verification.certificate;
        let name = format!("{identity}{VERIFICATION}{run}{ENDING}");
        let path = self.folder.join(name);
        self.write(&path, verification)?;
        Ok(path)
    }

    /// Written whole under another name first: a power cut leaves no half of one.
    fn write(&self, path: &Path, what: &impl Serialize) -> Result<(), CertificatesError> {
        let disk = |source| CertificatesError::Disk {
            path: path.to_path_buf(),
            source,
        };
        let mut text = serde_json::to_vec_pretty(what).map_err(|error| disk(error.into()))?;
        text.push(b'\n');
        fs::create_dir_all(&self.folder).map_err(disk)?;
        let part = path.with_extension("part");
        let mut file = OpenOptions::new()
            .write(true)
            .create(true)
            .truncate(true)
            .open(&part)
            .map_err(disk)?;
        file.write_all(&text).map_err(disk)?;
        file.sync_all().map_err(disk)?;
        fs::rename(&part, path).map_err(disk)?;
        #[cfg(unix)]
        File::open(&self.folder)
            .and_then(|folder| folder.sync_all())
            .map_err(disk)?;
        Ok(())
    }

    /// Every certificate, by sink and date, each with what has changed since the one before of
    /// the same sink, and with what is wrong in the folder.
    ///
    /// # Errors
    /// [`CertificatesError::Disk`] if the folder cannot be read; one that is not there is empty.
    pub fn list(
        &self,
        sink: Option<&str>,
        at_unix_s: i64,
    ) -> Result<CertificateList, CertificatesError> {
        let mut found = Vec::new();
        let mut verifications: Vec<VerificationView> = Vec::new();
        let mut troubles = Vec::new();
        for name in self.names()? {
            if name.contains(VERIFICATION) {
                match self.read(&name) {
                    Ok(verification) => verifications.push(verification),
                    Err(trouble) => troubles.push(trouble.to_string()),
                }
                continue;
            }
            match self.load(name.trim_end_matches(ENDING)) {
                Ok(certificate) => found.push(certificate),
                Err(trouble) => troubles.push(trouble.to_string()),
            }
        }
        found.retain(|one| sink.is_none_or(|sink| one.measurements.sink == sink));
        found.sort_by(|one, other| {
            let key = |certificate: &Certificate| {
                let of = &certificate.measurements;
                (of.sink.clone(), of.issued_unix_s, of.identity.clone())
            };
            key(one).cmp(&key(other))
        });
        let mut before: Option<&Certificate> = None;
        let mut certificates = Vec::new();
        for certificate in &found {
            let same =
                |before: &&Certificate| before.measurements.sink == certificate.measurements.sink;
            let drifts = before
                .filter(same)
                .map(|before| drift(before, certificate))
                .transpose()
                .unwrap_or_else(|error| {
                    troubles.push(error.to_string());
                    None
                });
            let identity = &certificate.measurements.identity;
            let verified = verifications
                .iter()
                .filter(|one| one.certificate == *identity)
                .cloned();
            let mut summary = CertificateSummary::new(certificate, at_unix_s);
            summary.drift = drifts.unwrap_or_default();
            summary.verifications = verified.collect();
            certificates.push(summary);
            before = Some(certificate);
        }
        Ok(CertificateList {
            certificates,
            troubles,
        })
    }

    fn read<T: DeserializeOwned>(&self, name: &str) -> Result<T, CertificatesError> {
        let path = self.folder.join(name);
        let bytes = fs::read(&path).map_err(|source| CertificatesError::Disk {
            path: path.clone(),
            source,
        })?;
        serde_json::from_slice(&bytes).map_err(|error| CertificatesError::Unsound {
            path,
            reason: error.to_string(),
        })
    }

    fn names(&self) -> Result<Vec<String>, CertificatesError> {
        let disk = |source| CertificatesError::Disk {
            path: self.folder.clone(),
            source,
        };
        let entries = match fs::read_dir(&self.folder) {
            Ok(entries) => entries,
            Err(error) if error.kind() == io::ErrorKind::NotFound => return Ok(Vec::new()),
            Err(error) => return Err(disk(error)),
        };
        let mut names = Vec::new();
        for entry in entries {
            let name = entry.map_err(disk)?.file_name();
            if let Some(name) = name.to_str().filter(|name| name.ends_with(ENDING)) {
                names.push(name.to_owned());
            }
        }
        names.sort_unstable();
        Ok(names)
    }
}
