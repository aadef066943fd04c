//! Places by URL: a web server of the test's own, and stores that cannot be reached. No network is needed.

use std::fs;
use std::io::{BufRead, BufReader, Write};
use std::net::{TcpListener, TcpStream};
use std::process::Command;
use std::sync::{Arc, Mutex};
use std::thread;
use std::time::{Duration, Instant};

use crate::support::{Place, Ran};

/// A web server for one file, with ranges, until the test process ends.
struct Server {
    address: String,
    /// The first lines of the requests, and their ranges.
    seen: Arc<Mutex<Vec<String>>>,
}

impl Server {
    fn of(name: &'static str, content: Vec<u8>) -> Self {
        let listener = TcpListener::bind("127.0.0.1:0").expect("a port");
        let address = format!("http://{}", listener.local_addr().expect("an address"));
        let seen = Arc::new(Mutex::new(Vec::new()));
        let noted = Arc::clone(&seen);
        thread::spawn(move || {
            for stream in listener.incoming().flatten() {
                // A reader that has left is no concern of the server.
                let _ = answer(&stream, name, &content, &noted);
            }
        });
        Self { address, seen }
    }

    fn seen(&self) -> Vec<String> {
        self.seen.lock().expect("not poisoned").clone()
    }
}

/// Answers one request and closes the connection.
fn answer(
    mut stream: &TcpStream,
    name: &str,
    content: &[u8],
    seen: &Mutex<Vec<String>>,
) -> std::io::Result<()> {
    let mut lines = BufReader::new(stream).lines();
    let request = lines.next().unwrap_or_else(|| Ok(String::new()))?;
    let mut range = None;
    for line in lines {
        let line = line?.to_ascii_lowercase();
        if line.is_empty() {
            break;
        }
        if let Some(asked) = line.strip_prefix("range: bytes=") {
            range =
                asked.split_once('-').map(|(from, to)| (from.parse().unwrap_or(0), to.parse().unwrap_or(0)));
        }
    }
    seen.lock().expect("not poisoned").push(format!("{request} {range:?}"));
    let mut words = request.split(' ');
    let (method, path) = (words.next().unwrap_or_default(), words.next().unwrap_or_default());
    let last: usize = content.len() - 1;
    let head =
        "Connection: close\r\nAccept-Ranges: bytes\r\nLast-Modified: Mon, 06 Jan 2025 00:00:00 GMT\r\n";
    let (status, extra, body) = match (method, range) {
        ("GET" | "HEAD", _) if path != format!("/{name}") => ("404 Not Found", String::new(), &content[..0]),
        ("HEAD", _) | ("GET", None) => ("200 OK", String::new(), content),
        ("GET", Some((from, to))) => {
            let to: usize = last.min(to);
            let extra = format!("Content-Range: bytes {from}-{to}/{}\r\n", content.len());
            ("206 Partial Content", extra, &content[from..=to])
        }
        _ => ("405 Method Not Allowed", String::new(), &content[..0]),
    };
    write!(stream, "HTTP/1.1 {status}\r\n{head}{extra}Content-Length: {}\r\n\r\n", body.len())?;
    if method != "HEAD" {
        stream.write_all(body)?;
    }
    stream.flush()
}

/// The command without the variables of the machine, and without a proxy between it and the test's server.
fn command(place: &Place, args: &[&str]) -> Command {
    let mut command = place.command(args);
    for (name, _) in std::env::vars() {
        if ["AWS_", "GOOGLE_", "AZURE_"].iter().any(|prefix| name.starts_with(prefix)) {
            command.env_remove(name);
        }
    }
    command.env("NO_PROXY", "*").env("no_proxy", "*");
    command
}

fn ran(mut command: Command) -> Ran {
    command.output().expect("runs").into()
}

#[test]
fn a_file_on_a_web_server_is_read_in_ranges() {
    let place = Place::new();
    place.run(
        "COPY (SELECT value AS week, value % 7 AS litres FROM generate_series(1, 50000)) TO 'sales.parquet'",
    );
    let content = fs::read(place.at("sales.parquet")).expect("written");
    let size = content.len();
    let server = Server::of("sales.parquet", content);
    let url = format!("{}/sales.parquet", server.address);

    let sql = format!("SELECT sum(litres) AS litres FROM '{url}'");
    let query = ran(command(&place, &["query", &sql, "--format", "csv"]));
    let expected: u32 = (1..=50_000).map(|week| week % 7).sum();
    assert_eq!((query.code, query.out), (Some(0), format!("litres\n{expected}\n")), "{}", query.err);
    let seen = server.seen();
    assert!(seen.iter().any(|request| request.starts_with("HEAD /sales.parquet ")), "{seen:?}");
    assert!(seen.iter().any(|request| request.contains("Some((")), "{seen:?}");
    assert!(
        size > 10_000 && !seen.iter().any(|request| request.starts_with("GET") && request.ends_with("None")),
        "{seen:?}"
    );

    place.write(
        "job.sql",
        &format!(
            "CREATE EXTERNAL TABLE sales STORED AS PARQUET LOCATION '{url}';
             COPY (SELECT count(*) AS n FROM sales WHERE week <= 20) TO 'n.csv';"
        ),
    );
    let job = ran(command(&place, &["run", "job.sql"]));
    assert_eq!((job.code, place.read("n.csv").as_str()), (Some(0), "n\n20\n"), "{}", job.err);
}

#[test]
fn what_a_web_server_does_not_have_is_said() {
    let place = Place::new();
    let server = Server::of("sales.parquet", b"PAR1".to_vec());
    for (path, told) in [("nothing.parquet", "there is no file '"), ("folder/", "name a file that is there")]
    {
        let sql = format!("SELECT * FROM '{}/{path}'", server.address);
        let query = ran(command(&place, &["query", &sql]));
        assert_eq!(query.code, Some(1));
        assert!(query.err.contains(told) && query.err.lines().count() == 1, "{path}: {}", query.err);
    }
}

#[test]
fn a_store_that_cannot_be_reached_is_given_up_soon() {
    let place = Place::new();
    // Nobody listens at a port that was free a moment ago.
    let nobody = TcpListener::bind("127.0.0.1:0").expect("a port").local_addr().expect("an address");
    for sql in ["SELECT * FROM 's3://warehouse/a.parquet'", "SELECT * FROM 's3://warehouse/sales/'"] {
        let mut query = command(&place, &["query", sql]);
        query.env("AWS_ENDPOINT", format!("http://{nobody}")).env("AWS_ALLOW_HTTP", "true");
        query.env("AWS_ACCESS_KEY_ID", "clerk").env("AWS_SECRET_ACCESS_KEY", "secret");
        let begun = Instant::now();
        let query = ran(query);
        assert_eq!(query.code, Some(1), "{}", query.err);
        for told in ["cannot reach 's3://warehouse/", "refused", "AWS_ENDPOINT"] {
            assert!(query.err.contains(told), "{told} in {}", query.err);
        }
        assert!(!query.err.contains("secret") && begun.elapsed() < Duration::from_secs(25), "{}", query.err);
    }
}

#[test]
fn an_address_without_encryption_is_to_be_allowed() {
    let place = Place::new();
    let mut query = command(&place, &["query", "SELECT * FROM 's3://warehouse/a.parquet'"]);
    query.env("AWS_ENDPOINT", "http://127.0.0.1:9");
    query.env("AWS_ACCESS_KEY_ID", "clerk").env("AWS_SECRET_ACCESS_KEY", "secret");
    let query = ran(query);
    assert!(query.code == Some(1) && query.err.contains("AWS_ALLOW_HTTP=true"), "{}", query.err);
}

#[test]
fn missing_credentials_are_named() {
    let place = Place::new();
    let nobody = TcpListener::bind("127.0.0.1:0").expect("a port").local_addr().expect("an address");
    // A machine outside the cloud: nobody to ask for credentials.
    let mut query = command(&place, &["query", "SELECT * FROM 's3://warehouse/a.parquet'"]);
    query.env("AWS_METADATA_ENDPOINT", format!("http://{nobody}"));
    let query = ran(query);
    assert_eq!(query.code, Some(1));
    for told in ["no credentials are set", "AWS_ACCESS_KEY_ID", "AWS_SKIP_SIGNATURE"] {
        assert!(query.err.contains(told), "{told} in {}", query.err);
    }
    let azure = ran(command(&place, &["query", "SELECT * FROM 'az://warehouse/a.parquet'"]));
    assert!(azure.code == Some(1) && azure.err.contains("AZURE_STORAGE_ACCOUNT_NAME"), "{}", azure.err);
    let mut google = command(&place, &["query", "SELECT * FROM 'gs://warehouse/a.parquet'"]);
    google.env("GOOGLE_SERVICE_ACCOUNT", place.at("no-such-key.json"));
    let google = ran(google);
    assert!(google.code == Some(1) && google.err.contains("GOOGLE_SERVICE_ACCOUNT"), "{}", google.err);
}

#[test]
fn a_url_is_no_file_to_write_to() {
    let place = Place::new();
    let query = place.stillwell(&["query", "SELECT 1 AS a", "--to", "s3://warehouse/a.csv"]);
    assert_eq!(query.code, Some(2));
    assert!(query.err.contains("COPY (…) TO 's3://warehouse/a.csv'"), "{}", query.err);
    assert!(place.files().is_empty());
}

#[test]
fn a_job_that_writes_twice_to_one_place_in_a_store_is_a_slip() {
    let place = Place::new();
    let job = place.run("COPY (SELECT 1 AS a) TO 's3://w/out/';\nCOPY (SELECT 2 AS a) TO 's3://w/out';");
    assert_eq!(job.code, Some(1));
    assert!(job.err.contains("statement 2 (line 2)") && job.err.contains("UNION ALL"), "{}", job.err);
}
