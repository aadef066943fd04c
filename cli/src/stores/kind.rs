//! The kinds of object stores and what people set for them.

use std::env;

use ::url::Url;
use datafusion::common::{Result, plan_datafusion_err};

use super::url;
use crate::nearest::nearest;

/// A kind of object store.
#[derive(Debug, Clone, Copy, PartialEq, Eq)]
pub(crate) enum Kind {
    /// Amazon S3 and what speaks its protocol.
    S3,
    /// Google Cloud Storage.
    Google,
    /// Azure Blob Storage and Data Lake Storage.
    Azure,
    /// A web server, for reading.
    Http,
}

/// Every scheme and its kind, in the order of messages.
const SCHEMES: [(&str, Kind); 7] = [
    ("s3", Kind::S3),
    ("gs", Kind::Google),
    ("az", Kind::Azure),
    ("abfs", Kind::Azure),
    ("abfss", Kind::Azure),
    ("http", Kind::Http),
    ("https", Kind::Http),
];

impl Kind {
    /// The kind of store that `url` lies in.
    ///
    /// # Errors
    /// For a scheme that no store has, with those there are.
    pub(crate) fn of(url: &Url) -> Result<Self> {
        let scheme = url.scheme();
        Self::of_scheme(scheme).ok_or_else(|| {
            let near = nearest(scheme, SCHEMES.iter().map(|(known, _)| *known));
            plan_datafusion_err!(
                "cannot reach '{}': no kind of store is called '{scheme}'{}; there are {} and plain paths. (A local \
                 path with a colon in its name is read when it begins with './'.)",
                url::shown(url),
                near.map(|scheme| format!(" (did you mean '{scheme}://'?)")).unwrap_or_default(),
                SCHEMES.map(|(known, _)| format!("{known}://")).join(", ")
            )
        })
    }

    /// The kind of stores with that scheme.
    pub(crate) fn of_scheme(scheme: &str) -> Option<Self> {
        SCHEMES.iter().find(|(known, _)| *known == scheme).map(|(_, kind)| *kind)
    }

    /// The name in messages.
    pub(crate) fn name(self) -> &'static str {
        match self {
            Self::S3 => "S3",
            Self::Google => "Google Cloud Storage",
            Self::Azure => "Azure storage",
            Self::Http => "the web server",
        }
    }

    /// How access is given to it.
    pub(super) fn credentials(self) -> &'static str {
        match self {
            Self::S3 => {
                "set AWS_ACCESS_KEY_ID and AWS_SECRET_ACCESS_KEY (and AWS_SESSION_TOKEN where there is one), or \
                 AWS_SKIP_SIGNATURE=true for a public bucket; the profiles in ~/.aws are not read"
            }
            Self::Google => {
                "set GOOGLE_SERVICE_ACCOUNT to the path of a key file, or GOOGLE_SKIP_SIGNATURE=true for a public bucket"
            }
            Self::Azure => {
                "set AZURE_STORAGE_ACCOUNT_NAME and AZURE_STORAGE_ACCOUNT_KEY (or AZURE_STORAGE_SAS_KEY), or \
                 AZURE_SKIP_SIGNATURE=true for a public container"
            }
            Self::Http => "the address is asked without any password but one in the URL itself",
        }
    }

    /// The variable that lets requests go without encryption; a URL with http:// needs none.
    pub(super) fn allows_http(self) -> Option<&'static str> {
        match self {
            Self::S3 => Some("AWS_ALLOW_HTTP"),
            Self::Google => Some("GOOGLE_ALLOW_HTTP"),
            Self::Azure => Some("AZURE_ALLOW_HTTP"),
            Self::Http => None,
        }
    }

    /// What decides where requests go.
    pub(super) fn address(self) -> &'static str {
        match self {
            Self::S3 => "the bucket's name, AWS_REGION and AWS_ENDPOINT, and the network",
            Self::Google => "the bucket's name and the network",
            Self::Azure => "the account's and the container's name, and the network",
            Self::Http => "the address and the network",
        }
    }

    /// Whether the environment says nothing about how to get access, so that the store asks the machine it runs on for
    /// credentials; machines outside the provider's cloud have none.
    pub(super) fn lacks_credentials(self) -> bool {
        let any: &[&str] = match self {
            Self::S3 => &[
                "AWS_ACCESS_KEY_ID",
                "AWS_WEB_IDENTITY_TOKEN_FILE",
                "AWS_CONTAINER_CREDENTIALS_RELATIVE_URI",
                "AWS_CONTAINER_CREDENTIALS_FULL_URI",
                "AWS_SKIP_SIGNATURE",
            ],
            Self::Google => &[
                "GOOGLE_SERVICE_ACCOUNT",
                "GOOGLE_SERVICE_ACCOUNT_PATH",
                "SERVICE_ACCOUNT",
                "GOOGLE_SERVICE_ACCOUNT_KEY",
                "GOOGLE_APPLICATION_CREDENTIALS",
                "GOOGLE_SKIP_SIGNATURE",
            ],
            Self::Azure => &[
                "AZURE_STORAGE_ACCOUNT_KEY",
                "AZURE_STORAGE_ACCESS_KEY",
                "AZURE_STORAGE_SAS_KEY",
                "AZURE_STORAGE_SAS_TOKEN",
                "AZURE_STORAGE_TOKEN",
                "AZURE_STORAGE_CLIENT_ID",
                "AZURE_CLIENT_ID",
                "AZURE_FEDERATED_TOKEN_FILE",
                "AZURE_USE_AZURE_CLI",
                "AZURE_SKIP_SIGNATURE",
                "AZURE_STORAGE_USE_EMULATOR",
            ],
            Self::Http => return false,
        };
        any.iter().all(|name| env::var_os(name).is_none())
    }
}

#[cfg(test)]
mod tests {
    use super::*;

    fn kind(text: &str) -> Result<Kind> {
        Kind::of(&Url::parse(text).expect("a URL"))
    }

    #[test]
    fn schemes_tell_the_kind() {
        assert_eq!(kind("s3://warehouse/a").expect("known"), Kind::S3);
        assert_eq!(kind("gs://warehouse/a").expect("known"), Kind::Google);
        for azure in ["az://c/a", "abfs://c/a", "abfss://c@account.dfs.core.windows.net/a"] {
            assert_eq!(kind(azure).expect("known"), Kind::Azure, "{azure}");
        }
        assert_eq!(kind("https://ostrel.example/a.parquet").expect("known"), Kind::Http);
    }

    #[test]
    fn an_unknown_scheme_comes_with_those_there_are() {
        let told = kind("s3a://warehouse/a").expect_err("unknown").to_string();
        assert!(told.contains("did you mean 's3://'"), "{told}");
        for (scheme, _) in SCHEMES {
            assert!(told.contains(&format!("{scheme}://")), "{scheme} in {told}");
        }
    }
}
