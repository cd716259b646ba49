/**
 * Who may know whom: reads what one source imports and which environment it reads, and names each rule it breaks.
 * A source that passes cannot reach further through another one either, since every source is held to the same rules.
 */
import { posix } from 'node:path';
import ts from 'typescript';

/** `path` is from the root of the project, with forward slashes. */
export interface Source {
	path: string;
	text: string;
}

/** The pure libraries, and which others each may import besides itself and zod. */
const pure: Record<string, string[]> = {
	turnline: [],
	winding: ['turnline'],
	coil: ['winding'],
	// What is typed and how figures are written: two files that import nothing.
	spec: ['coil', 'winding', 'typed-values.ts', 'format.ts']
};
/** What stands outside and speaks the line, and which libraries of `src` it may import. */
const outside: Record<string, string[]> = {
	simulator: ['turnline', 'winding'],
	'firmware-protocol': ['turnline', 'serial']
};
/** Needs Node and a device: for the server and the bridge, never for a page. It knows the line and nothing else of src. */
const serialHome = 'src/lib/serial/';
const serialPackage = 'serialport';
const databasePackages = ['pg', 'kysely'];
const databaseHomes = ['src/lib/server/db/', 'migrations/', 'tests/'];
const environmentHome = 'src/lib/server/env.ts';
/** The simulator and the bridge are programs of their own that may not import the server's: they take their link keys here. */
const environmentHomes = [environmentHome, 'simulator/main.ts', 'firmware-protocol/bridge/main.ts'];

/** One sentence for each rule broken, naming the file and what it imports; empty when it keeps them all. */
export function rulesBroken({ path, text }: Source): string[] {
	const { imports, readsEnvironment } = read(path, text);
	const broken: string[] = [];
	const under = (...homes: string[]) => homes.some((home) => path.startsWith(home));
	const test = /\.test\.[jt]s$/.test(path);
	const pureLib = Object.keys(pure).find((name) => under(`src/lib/${name}/`));
	const outsider = Object.keys(outside).find((name) => under(`${name}/`));

	for (const { specifier, typeOnly } of imports) {
		const target = resolve(path, specifier);
		const goesTo = (...names: string[]) => names.some((name) => `${target}/`.startsWith(`src/lib/${name}/`));
		const packageName = target === null ? specifier.split('/')[0]! : null;
		const says = `${path} imports ${specifier}: `;

		if (pureLib && !test && specifier !== 'zod' && !goesTo(pureLib, ...pure[pureLib]!))
			broken.push(`${says}a pure library imports itself, ${[...pure[pureLib]!, 'zod'].join(' and ')}`);
		// A type alone is erased: nothing of the server comes with it.
		if (!typeOnly && goesTo('server') && !isServerFile(path)) broken.push(`${says}only server files import lib/server`);
		if (under(serialHome) && !test && target?.startsWith('src/') && !goesTo('serial', 'turnline'))
			broken.push(`${says}of src, lib/serial imports lib/turnline`);
		if (packageName === serialPackage && !under(serialHome)) broken.push(`${says}only ${serialHome} knows it`);
		if (!typeOnly && goesTo('serial') && !under(serialHome) && !outsider && !isServerFile(path))
			broken.push(`${says}only server files and the bridge read serial ports`);
		if (packageName && databasePackages.includes(packageName) && !under(...databaseHomes))
			broken.push(`${says}only ${databaseHomes.join(', ')} know the database`);
		if (outsider && target?.startsWith('src/') && !goesTo(...outside[outsider]!))
			broken.push(
				`${says}of src, ${outsider} imports ${outside[outsider]!.map((name) => `lib/${name}`).join(' and ')}`
			);
		if (specifier.startsWith('$env/') && !environmentHomes.includes(path))
			broken.push(`${says}the environment is read in ${environmentHome}`);
	}
	if (readsEnvironment && !environmentHomes.includes(path) && !under('tests/') && !test)
		broken.push(`${path} reads the environment: that is done in ${environmentHome}`);
	return broken;
}

/** Files that never reach a browser. What stands in `simulator/` and `firmware-protocol/` is none of the server's. */
function isServerFile(path: string): boolean {
	if (/^(src\/lib\/server|src\/commands|migrations|tests)\//.test(path)) return true;
	if (/^src\/entry\.[jt]s$/.test(path) || /^[^/]+\.config\.[jt]s$/.test(path)) return true;
	const name = posix.basename(path);
	return (
		path.startsWith('src/') &&
		(/^\+server\.[jt]s$/.test(name) || /\.server\.[jt]s$/.test(name) || /\.d\.ts$/.test(name))
	);
}

/** The path a specifier leads to from the root, or null for a package. */
function resolve(path: string, specifier: string): string | null {
	if (specifier === '$lib' || specifier.startsWith('$lib/')) return posix.normalize(`src/lib${specifier.slice(4)}`);
	if (specifier.startsWith('/src/')) return posix.normalize(specifier.slice(1));
	return specifier.startsWith('.') ? posix.join(posix.dirname(path), specifier) : null;
}

function read(path: string, text: string) {
	const code = path.endsWith('.svelte') ? scriptsOf(text) : text;
	const source = ts.createSourceFile(path, code, ts.ScriptTarget.Latest, true, ts.ScriptKind.TS);
	const imports: { specifier: string; typeOnly: boolean }[] = [];
	let readsEnvironment = false;

	const literal = (node: ts.Node | undefined, typeOnly = false) => {
		if (node && ts.isStringLiteralLike(node)) imports.push({ specifier: node.text, typeOnly });
	};
	const visit = (node: ts.Node): void => {
		if (ts.isImportDeclaration(node) || ts.isExportDeclaration(node)) {
			literal(node.moduleSpecifier, isTypeOnly(node));
			const from = node.moduleSpecifier && ts.isStringLiteralLike(node.moduleSpecifier) && node.moduleSpecifier.text;
			// import { env } from 'node:process'
			if ((from === 'node:process' || from === 'process') && /\benv\b/.test(node.getText())) readsEnvironment = true;
		} else if (ts.isImportTypeNode(node) && ts.isLiteralTypeNode(node.argument)) literal(node.argument.literal, true);
		else if (ts.isExternalModuleReference(node)) literal(node.expression);
		else if (ts.isCallExpression(node)) {
			const callee = node.expression.getText();
			if (['import', 'require', 'import.meta.glob'].includes(callee)) literal(node.arguments[0]);
		} else if (ts.isPropertyAccessExpression(node) && node.name.text === 'env') {
			// Vite writes its own words (dev, ssr, mode) into import.meta.env: not the environment.
			if (node.expression.getText().replace('globalThis.', '') === 'process' && !isWritten(node))
				readsEnvironment = true;
		} else if (ts.isElementAccessExpression(node) && node.getText().startsWith('process[')) readsEnvironment = true;
		else if (ts.isVariableDeclaration(node) && node.initializer?.getText() === 'process') {
			if (/\benv\b/.test(node.name.getText())) readsEnvironment = true;
		}
		ts.forEachChild(node, visit);
	};
	visit(source);
	return { imports, readsEnvironment };
}

/** Only `import type` and `export type`: with `import { type A }` the module itself may still be loaded. */
function isTypeOnly(node: ts.ImportDeclaration | ts.ExportDeclaration): boolean {
	return ts.isExportDeclaration(node)
		? node.isTypeOnly
		: node.importClause?.phaseModifier === ts.SyntaxKind.TypeKeyword;
}

/** `process.env.A = …` and `delete process.env.A` tell a library something; they read nothing. */
function isWritten(environment: ts.Node): boolean {
	const variable = environment.parent;
	const outer = variable.parent;
	if (!ts.isPropertyAccessExpression(variable) && !ts.isElementAccessExpression(variable)) return false;
	if (variable.expression !== environment) return false;
	if (ts.isDeleteExpression(outer)) return true;
	const assigning = [ts.SyntaxKind.EqualsToken, ts.SyntaxKind.QuestionQuestionEqualsToken];
	return ts.isBinaryExpression(outer) && outer.left === variable && assigning.includes(outer.operatorToken.kind);
}

/** All script blocks of a component, one after the other, and the dynamic imports of its markup. */
function scriptsOf(text: string): string {
	const scripts = [...text.matchAll(/<script\b[^>]*>([\s\S]*?)<\/script>/g)].map((match) => match[1]!);
	const markup = text.replace(/<script\b[^>]*>[\s\S]*?<\/script>/g, '');
	const dynamic = [...markup.matchAll(/\bimport\(\s*(['"`][^'"`]*['"`])\s*\)/g)].map((match) => `import(${match[1]});`);
	return [...scripts, ...dynamic].join('\n');
}
