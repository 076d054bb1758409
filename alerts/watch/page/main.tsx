import { render } from "preact";
import { App } from "./app.tsx";
import { connect } from "./live.ts";
import "./page.css";

connect();
render(<App />, document.getElementById("app")!);
